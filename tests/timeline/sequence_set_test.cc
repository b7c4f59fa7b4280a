// SPDX-License-Identifier: Apache-2.0
#include "timeline/sequence_set.h"

#include <gtest/gtest.h>

#include <random>
#include <set>

namespace steelyard::timeline {
namespace {

TEST(SequenceSet, TakesEachNumberOnceWhateverTheOrder) {
  for (unsigned seed = 1; seed <= 20; ++seed) {
    SCOPED_TRACE(seed);
    std::mt19937 random(seed);
    SequenceSet set;
    std::set<std::uint64_t> plain;
    for (int i = 0; i < 2000; ++i) {
      const std::uint64_t n = random() % 500;
      EXPECT_EQ(set.insert(n), plain.insert(n).second) << n;
      EXPECT_EQ(set.highest(), *plain.rbegin());
    }
    EXPECT_LE(set.runs(), 250U);
  }
}

TEST(SequenceSet, AscendingNumbersStayOneRun) {
  SequenceSet set;
  for (std::uint64_t n = 1; n <= 10000; ++n) EXPECT_TRUE(set.insert(n));
  EXPECT_EQ(set.runs(), 1U);
  EXPECT_FALSE(set.insert(1));
}

TEST(SequenceSet, ClosesTheOldestGapAtItsBound) {
  SequenceSet set;
  for (std::uint64_t n = 0; n <= 2 * SequenceSet::kMostRuns; n += 2) EXPECT_TRUE(set.insert(n));
  EXPECT_EQ(set.runs(), SequenceSet::kMostRuns);
  EXPECT_FALSE(set.insert(1)) << "the oldest gap counts as taken";
  EXPECT_TRUE(set.insert(3)) << "the next one does not";
}

}  // namespace
}  // namespace steelyard::timeline
