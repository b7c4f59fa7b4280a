// SPDX-License-Identifier: Apache-2.0
// What is told of a channel, word for word.
#include "timeline/words.h"

#include <gtest/gtest.h>

#include <array>
#include <cmath>
#include <limits>
#include <memory>
#include <string>

namespace steelyard::timeline {
namespace {

using engine::Condition;

/// One channel, "sonic" in m, datasheet 0.004.
rig::Rig make_rig() {
  auto model = std::make_shared<engine::Model>();
  model->channels.resize(1);
  model->channels[0].name = "sonic";
  model->channels[0].unit = "m";
  model->channels[0].sd = 0.004;
  rig::Rig rig;
  rig.model = model;
  return rig;
}

engine::Estimate estimate_with(Condition condition, double probability) {
  engine::Estimate estimate;
  estimate.channels.resize(1);
  engine::ChannelEstimate& channel = estimate.channels[0];
  const double rest = (1.0 - probability) / (engine::kConditions - 1);
  channel.probability.fill(rest);
  channel.probability[static_cast<std::size_t>(condition)] = probability;
  channel.noise_sd = 0.004;
  channel.offset = 0.18234;
  channel.offset_sd = 0.0061;
  channel.age_s = 0.5;
  return estimate;
}

std::string words(const engine::Estimate& estimate) { return channel_words(make_rig(), 0, estimate); }

TEST(ChannelWords, SayWhatAndHowSure) {
  EXPECT_EQ(words(estimate_with(Condition::kSound, 0.996)), "sonic is sound, 100 %");
  EXPECT_EQ(words(estimate_with(Condition::kCreeping, 0.93)), "sonic creeps, +0.182 ± 0.006 m off, 93 %");
  EXPECT_EQ(words(estimate_with(Condition::kOffset, 0.93)), "sonic reads +0.182 ± 0.006 m off, 93 %");
  EXPECT_EQ(words(estimate_with(Condition::kWandering, 0.93)), "sonic wanders, +0.182 ± 0.006 m off, 93 %");
  EXPECT_EQ(words(estimate_with(Condition::kStuck, 0.93)), "sonic is stuck, 93 %");
  EXPECT_EQ(words(estimate_with(Condition::kFrozen, 0.99)), "sonic repeats its last value, 99 %");
}

TEST(ChannelWords, ANegativeOffsetKeepsItsSign) {
  engine::Estimate estimate = estimate_with(Condition::kOffset, 0.93);
  estimate.channels[0].offset = -0.18234;
  EXPECT_EQ(words(estimate), "sonic reads -0.182 ± 0.006 m off, 93 %");
}

TEST(ChannelWords, AUnitOf1IsNotWritten) {
  auto model = std::make_shared<engine::Model>(*make_rig().model);
  model->channels[0].unit = "1";
  rig::Rig rig;
  rig.model = model;
  EXPECT_EQ(channel_words(rig, 0, estimate_with(Condition::kOffset, 0.93)),
            "sonic reads +0.182 ± 0.006 off, 93 %");
}

TEST(ChannelWords, TellNoiseWhereItIsAboveTheDatasheet) {
  engine::Estimate estimate = estimate_with(Condition::kSound, 1.0);
  estimate.channels[0].noise_sd = 0.0123;
  EXPECT_EQ(words(estimate), "sonic is sound, 100 %, noise 0.012 m (datasheet 0.004)");
}

TEST(ChannelWords, TellTheLevelAtWhichAChannelIsStuck) {
  engine::Estimate estimate = estimate_with(Condition::kStuck, 0.98);
  estimate.explanations.push_back({0.9, {{0, Condition::kStuck, 2.1304, 0.002}}});
  EXPECT_EQ(words(estimate), "sonic is stuck at 2.130 m, 98 %");
}

TEST(ChannelWords, TellSilenceBeforeTheCondition) {
  engine::Estimate estimate = estimate_with(Condition::kFrozen, 0.99);
  estimate.channels[0].silent = 0.97;
  estimate.channels[0].age_s = 42.9;
  EXPECT_EQ(words(estimate), "sonic is silent for 42 s, 97 %");
  estimate.channels[0].age_s = 7199.0;
  EXPECT_EQ(words(estimate), "sonic is silent for 119 min, 97 %");
  estimate.channels[0].age_s = -1.0;
  EXPECT_EQ(words(estimate), "sonic is silent, 97 %");
}

TEST(ChannelWords, TellThatThereIsNoReadingYet) {
  engine::Estimate estimate = estimate_with(Condition::kSound, 0.99);
  estimate.channels[0].age_s = -1.0;
  EXPECT_EQ(words(estimate), "sonic has given no reading yet");
}

TEST(LeadingCondition, IsTheMostProbableOne) {
  engine::ChannelEstimate channel;
  channel.probability = {0.3, 0.1, 0.1, 0.1, 0.05, 0.35};
  EXPECT_EQ(leading_condition(channel), Condition::kFrozen);
  EXPECT_STREQ(condition_name(Condition::kFrozen), "frozen");
}

TEST(Ne107Status, FollowsTheMostProbableCondition) {
  const std::array<const char*, engine::kConditions> expected{
      "good", "maintenance required", "out of specification", "out of specification", "failure", "failure"};
  for (std::size_t i = 0; i < expected.size(); ++i) {
    const engine::Estimate estimate = estimate_with(static_cast<Condition>(i), 0.9);
    EXPECT_STREQ(ne107_status(estimate.channels[0]), expected[i]);
  }
  engine::Estimate silent = estimate_with(Condition::kSound, 1.0);
  silent.channels[0].silent = 0.9;
  EXPECT_STREQ(ne107_status(silent.channels[0]), "failure");
}

struct RoundedCase {
  double value;
  double sd;
  const char* text;
};

TEST(Rounded, WritesAsManyDigitsAsTheUncertaintyDeserves) {
  constexpr double kInfinity = std::numeric_limits<double>::infinity();
  const RoundedCase cases[] = {
      {0.18234, 0.006, "0.182"},
      {0.18234, 0.06, "0.18"},
      {0.18234, 0.0012, "0.1823"},
      {0.18234, 0.0096, "0.182"},
      {2.0, 0.03, "2.00"},
      {-0.0004, 0.03, "0.00"},
      {1234.0, 56.0, "1230"},
      {1234.0, 12.0, "1234"},
      {-1234.0, 560.0, "-1200"},
      {0.18234, 0.0, "0.18234"},
      {0.18234, kInfinity, "0.18234"},
      {1e300, 1e299, "1e+300"},
  };
  for (const RoundedCase& one : cases) {
    EXPECT_EQ(rounded(one.value, one.sd), one.text) << one.value << " ± " << one.sd;
  }
  EXPECT_EQ(rounded(std::nan(""), 0.1), "nan");
  EXPECT_EQ(rounded(1e-20, 1e-21), "1e-20");
}

}  // namespace
}  // namespace steelyard::timeline
