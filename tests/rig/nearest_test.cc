// SPDX-License-Identifier: Apache-2.0
// Edit distances by hand, and which name is taken for the one that was meant.
#include "rig/nearest.h"

#include <gtest/gtest.h>

#include <array>
#include <string>
#include <string_view>

namespace steelyard::rig {
namespace {

TEST(EditDistance, HandCountedCases) {
  EXPECT_EQ(edit_distance("", ""), 0);
  EXPECT_EQ(edit_distance("", "abc"), 3);
  EXPECT_EQ(edit_distance("abc", ""), 3);
  EXPECT_EQ(edit_distance("range", "range"), 0);
  EXPECT_EQ(edit_distance("rezolution", "resolution"), 1);
  EXPECT_EQ(edit_distance("raneg", "range"), 1);  // two neighbours swapped
  EXPECT_EQ(edit_distance("memroy", "memory"), 1);
  EXPECT_EQ(edit_distance("kitten", "sitting"), 3);
  EXPECT_EQ(edit_distance("sd", "ds"), 1);
}

TEST(Nearest, TakesTheFewestEditsAndTheFirstOfEquals) {
  constexpr std::array<std::string_view, 4> kKnown{"reads", "range", "resolution", "sd"};
  EXPECT_EQ(nearest("raneg", kKnown), "range");
  EXPECT_EQ(nearest("red", kKnown), "reads");
  EXPECT_EQ(nearest("resolutoin", kKnown), "resolution");
  EXPECT_EQ(nearest("sdd", kKnown), "sd");
}

TEST(Nearest, DoesNotGuess) {
  constexpr std::array<std::string_view, 3> kKnown{"reads", "range", "sd"};
  EXPECT_EQ(nearest("version", kKnown), "");
  EXPECT_EQ(nearest(std::string(100000, 'r'), kKnown), "");
  EXPECT_EQ(nearest("x", {}), "");
}

TEST(DidYouMean, ListsTheKnownWhereNoneIsNear) {
  constexpr std::array<std::string_view, 2> kKnown{"reads", "sd"};
  EXPECT_EQ(did_you_mean("raeds", kKnown), "; did you mean reads?");
  EXPECT_EQ(did_you_mean("version", kKnown), "; known are reads, sd");
}

}  // namespace
}  // namespace steelyard::rig
