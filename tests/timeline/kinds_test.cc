// SPDX-License-Identifier: Apache-2.0
// What leads, and the status that it makes.
#include "timeline/kinds.h"

#include <gtest/gtest.h>

#include <array>

namespace steelyard::timeline {
namespace {

using engine::Condition;

engine::ChannelEstimate channel(double sound, double trust) {
  engine::ChannelEstimate one;
  one.probability = {sound, 0.1 * (1 - sound), 0.6 * (1 - sound), 0.3 * (1 - sound), 0.0, 0.0};
  one.trust = trust;
  return one;
}

TEST(LeadingCondition, IsTheMostProbableOne) {
  engine::ChannelEstimate one;
  one.probability = {0.3, 0.1, 0.1, 0.1, 0.05, 0.35};
  EXPECT_EQ(leading_condition(one), Condition::kFrozen);
  EXPECT_STREQ(condition_name(Condition::kFrozen), "frozen");
}

TEST(LeadingKind, IsNotSoundWhereTrustIsUnderOneHalf) {
  EXPECT_EQ(leading_kind(channel(1.0, 1.0)), kSoundKind);
  EXPECT_EQ(leading_kind(channel(0.55, 0.54)), kSoundKind);
  EXPECT_EQ(leading_kind(channel(0.45, 0.44)), static_cast<int>(Condition::kOffset));
  EXPECT_EQ(leading_kind(channel(0.60, 0.45)), static_cast<int>(Condition::kOffset)) << "noise takes less";
  EXPECT_EQ(leading_kind(channel(0.90, 0.45)), kNoisyKind);
  EXPECT_EQ(leading_kind(channel(1.0, 0.01)), kNoisyKind);
  engine::ChannelEstimate silent = channel(1.0, 1.0);
  silent.silent = 0.6;
  EXPECT_EQ(leading_kind(silent), kSilentKind);
  for (double sound = 0.0; sound <= 1.0; sound += 0.05) {
    for (double level = 0.0; level <= 1.0; level += 0.05) {
      const engine::ChannelEstimate one = channel(sound, sound * level);
      EXPECT_TRUE(one.trust >= 0.5 || leading_kind(one) != kSoundKind) << sound << " " << level;
    }
  }
}

TEST(KindProbability, OfNoiseIsThatOfBeingSoundElse) {
  EXPECT_EQ(kind_probability(channel(0.9, 0.1), kNoisyKind), 0.9);
  EXPECT_STREQ(kind_name(kNoisyKind), "noisy");
  EXPECT_STREQ(kind_name(kSilentKind), "silent");
}

TEST(Ne107Status, FollowsTheMostProbableCondition) {
  const std::array<const char*, engine::kConditions> expected{
      "good", "maintenance required", "out of specification", "out of specification", "failure", "failure"};
  for (std::size_t i = 0; i < expected.size(); ++i) {
    engine::ChannelEstimate one;
    one.probability.fill(0.02);
    one.probability[i] = 0.9;
    one.trust = i == 0 ? 0.9 : 0.02;
    EXPECT_STREQ(ne107_status(one), expected[i]);
  }
  engine::ChannelEstimate silent = channel(1.0, 1.0);
  silent.silent = 0.9;
  EXPECT_STREQ(ne107_status(silent), "failure");
  EXPECT_STREQ(ne107_status(channel(0.99, 0.2)), "maintenance required") << "noisy";
}

}  // namespace
}  // namespace steelyard::timeline
