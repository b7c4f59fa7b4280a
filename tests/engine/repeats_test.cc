// SPDX-License-Identifier: Apache-2.0
#include "engine/repeats.h"

#include <gtest/gtest.h>

#include <cmath>

#include "suite/random.h"

namespace steelyard::engine {
namespace {

ChannelModel digital(double sd, double resolution) {
  ChannelModel c;
  c.sd = sd;
  c.resolution = resolution;
  return c;
}

// Two readings of one value with noise sd share a bin: counted over simulated pairs at random places.
TEST(RepeatRate, StartsFromTheNoiseAndTheStep) {
  constexpr std::uint64_t kSeed = 41;
  suite::Random random(kSeed);
  for (const double step : {0.2, 0.5}) {
    constexpr int kPairs = 200000;
    int equal = 0;
    for (int i = 0; i < kPairs; ++i) {
      const double x = random.uniform();
      equal += std::round((x + random.normal()) / step) == std::round((x + random.normal()) / step);
    }
    EXPECT_NEAR(RepeatRate(digital(1.0, step), 1.0).mean(), equal / double(kPairs), 0.003)
        << "seed " << kSeed << ", step " << step;
  }
}

TEST(RepeatRate, IsBoundedForCoarseStepsAndDefinedWithoutOne) {
  EXPECT_DOUBLE_EQ(RepeatRate(digital(1.0, 100.0), 1.0).mean(), 0.9);
  EXPECT_DOUBLE_EQ(effective_resolution(digital(3.0, 0.0)), 0.03);
}

TEST(RepeatRate, LearnsFromReadingsAndNotFromAFreeze) {
  RepeatRate rate(digital(1.0, 0.1), 1.0);
  const double prior = rate.mean();
  for (int i = 0; i < 10; ++i) rate.learn(true, 0.0, 0.0);
  EXPECT_DOUBLE_EQ(rate.mean(), prior);
  for (int i = 0; i < 20; ++i) rate.learn(true, 1.0, 0.0);
  EXPECT_NEAR(rate.mean(), 0.5 * (prior + 1.0), 1e-12);  // as many readings as the prior is worth
}

// Repeats come in runs: in pairs of two readings, a change is followed by a repeat and a repeat by a change.
TEST(RepeatRate, LearnsWhatFollowsARepeatApartFromWhatFollowsAChange) {
  RepeatRate rate(digital(1.0, 0.1), 1.0);
  const double prior = rate.mean();
  for (int i = 0; i < 20; ++i) {
    rate.learn(true, 1.0, 0.0);
    rate.learn(false, 1.0, 0.0);
  }
  EXPECT_NEAR(rate.mean(), 0.5 * (prior + 1.0), 1e-12);  // after a change
  rate.learn(true, 0.0, 0.0);
  EXPECT_NEAR(rate.mean(), 0.5 * prior, 1e-12);  // after a repeat
}

TEST(RepeatRate, ForgetsByHalfIn100ResponseTimes) {
  RepeatRate rate(digital(1.0, 0.1), 2.0);
  const double prior = rate.mean();
  rate.learn(true, 0.0, 0.0);
  for (int i = 0; i < 20; ++i) rate.learn(true, 1.0, 0.0);
  rate.learn(true, 0.0, 200.0);
  EXPECT_NEAR(rate.mean(), (20.0 * prior + 10.0) / 30.0, 1e-12);
}

TEST(RepeatFactor, NeverPunishesARepeatNorRewardsAChange) {
  EXPECT_DOUBLE_EQ(repeat_factor(true, 0.4, 0.1), 4.0);
  EXPECT_DOUBLE_EQ(repeat_factor(true, 0.1, 0.4), 1.0);
  EXPECT_DOUBLE_EQ(repeat_factor(false, 0.4, 0.1), 0.6 / 0.9);
  EXPECT_DOUBLE_EQ(repeat_factor(false, 0.1, 0.4), 1.0);
  EXPECT_TRUE(std::isfinite(repeat_factor(true, 0.4, 0.0)));
  EXPECT_TRUE(std::isfinite(repeat_factor(false, 0.4, 1.0)));
}

}  // namespace
}  // namespace steelyard::engine
