// SPDX-License-Identifier: Apache-2.0
// Which stretches share a cause.
#include "timeline/episodes.h"

#include <gtest/gtest.h>

#include <vector>

namespace steelyard::timeline {
namespace {

constexpr engine::TimeNs kS = 1'000'000'000;
constexpr int kOffset = static_cast<int>(engine::Condition::kOffset);
constexpr int kFrozen = static_cast<int>(engine::Condition::kFrozen);

Stretch stretch(int channel, engine::TimeNs from_s, int kind) {
  Stretch one;
  one.channel = channel;
  one.from_ns = from_s * kS;
  one.to_ns = one.from_ns + kS;
  one.kind = kind;
  return one;
}

/// Channels 0 and 1 form a group; 0, 2 and 3 come from one source, 1 from another, nobody fed 4.
std::vector<std::size_t> causes(std::vector<Stretch> stretches) {
  engine::Model model;
  model.channels.resize(5);
  model.common.push_back({{0, 1}, 0.1});
  const std::vector<int> sources{7, 8, 7, 7, -1};
  std::vector<std::size_t> out;
  for (const Episode& one : episodes_of(std::move(stretches), model, sources, 5 * kS)) {
    EXPECT_EQ(one.id, out.size() + 1);
    out.push_back(one.cause);
  }
  return out;
}

using Ids = std::vector<std::size_t>;

TEST(Episodes, AGroupThatTurnsUnsoundTogetherHasOneCause) {
  EXPECT_EQ(causes({stretch(0, 10, kOffset), stretch(1, 15, kSilentKind)}), (Ids{1, 1}));
  EXPECT_EQ(causes({stretch(0, 10, kOffset), stretch(1, 16, kOffset)}), (Ids{1, 2})) << "too late";
  EXPECT_EQ(causes({stretch(0, 10, kOffset), stretch(2, 10, kOffset)}), (Ids{1, 2})) << "no group";
}

TEST(Episodes, ChannelsOfOneSourceThatFreezeTogetherHaveOneCause) {
  EXPECT_EQ(causes({stretch(2, 10, kFrozen), stretch(3, 11, kFrozen), stretch(0, 12, kFrozen)}),
            (Ids{1, 1, 1}));
  EXPECT_EQ(causes({stretch(2, 10, kFrozen), stretch(1, 10, kFrozen)}), (Ids{1, 2})) << "another source";
  EXPECT_EQ(causes({stretch(2, 10, kFrozen), stretch(3, 10, kOffset)}), (Ids{1, 2})) << "another kind";
  EXPECT_EQ(causes({stretch(4, 10, kFrozen), stretch(4, 10, kFrozen)}), (Ids{1, 2})) << "no source";
}

TEST(Episodes, CausesReachFromOneToTheNext) {
  EXPECT_EQ(causes({stretch(2, 10, kFrozen), stretch(4, 11, kOffset), stretch(0, 14, kFrozen),
                    stretch(1, 18, kOffset), stretch(0, 40, kFrozen)}),
            (Ids{1, 2, 1, 1, 5}));
}

TEST(Episodes, TwoSpellsOfOneChannelAreTwoCauses) {
  EXPECT_EQ(causes({stretch(2, 10, kFrozen), stretch(2, 12, kFrozen)}), (Ids{1, 2}));
}

}  // namespace
}  // namespace steelyard::timeline
