// SPDX-License-Identifier: Apache-2.0
// What is told of a channel, word for word.
#include "timeline/words.h"

#include <gtest/gtest.h>

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

constexpr engine::TimeNs kNow = 1'000'000'000'000;

engine::Estimate estimate_with(Condition condition, double probability) {
  engine::Estimate estimate;
  estimate.time_ns = kNow;
  estimate.channels.resize(1);
  engine::ChannelEstimate& channel = estimate.channels[0];
  const double rest = (1.0 - probability) / (engine::kConditions - 1);
  channel.probability.fill(rest);
  channel.probability[static_cast<std::size_t>(condition)] = probability;
  channel.trust = channel.probability[0];
  channel.noise_sd = 0.004;
  channel.offset = 0.18234;
  channel.offset_sd = 0.0061;
  channel.age_s = 0.5;
  return estimate;
}

std::string words(const engine::Estimate& estimate, engine::TimeNs since_ns = 0, const TellTime& time = {}) {
  return channel_words(make_rig(), 0, estimate, since_ns, time);
}

TEST(ChannelWords, SayWhatHowMuchHowSureAndWhatElse) {
  EXPECT_EQ(words(estimate_with(Condition::kSound, 0.996)), "sonic is sound, 100 %");
  EXPECT_EQ(words(estimate_with(Condition::kCreeping, 0.93)),
            "sonic creeps, +0.182 m off (90 %: +0.172 to +0.192), 93 %; or else sonic sound, 1 %");
  EXPECT_EQ(words(estimate_with(Condition::kOffset, 0.93)),
            "sonic reads +0.182 m off (90 %: +0.172 to +0.192), 93 %; or else sonic sound, 1 %");
  EXPECT_EQ(words(estimate_with(Condition::kWandering, 0.93)),
            "sonic wanders, +0.182 m off (90 %: +0.172 to +0.192), 93 %; or else sonic sound, 1 %");
  EXPECT_EQ(words(estimate_with(Condition::kStuck, 0.93)), "sonic is stuck, 93 %; or else sonic sound, 1 %");
  EXPECT_EQ(words(estimate_with(Condition::kFrozen, 0.99)),
            "sonic repeats its last value, 99 %; nothing else above 1 %");
}

TEST(ChannelWords, SaySinceWhen) {
  engine::Estimate estimate = estimate_with(Condition::kFrozen, 0.99);
  estimate.channels[0].unsound_since_ns = kNow - 42'500'000'000;
  EXPECT_EQ(words(estimate), "sonic repeats its last value, 99 %, for 42 s; nothing else above 1 %");
  EXPECT_EQ(words(estimate, kNow - 1), words(estimate)) << "what the engine says goes first";
  EXPECT_EQ(words(estimate, 0, [](engine::TimeNs t) { return std::to_string(t / 1'000'000); }),
            "sonic repeats its last value, 99 %, since 957500; nothing else above 1 %");
  estimate.channels[0].unsound_since_ns = 0;
  EXPECT_EQ(words(estimate, kNow - 150'000'000'000),
            "sonic repeats its last value, 99 %, for 2 min; nothing else above 1 %");
}

// Two explanations compete: both are told, each with its probability.
TEST(ChannelWords, TellTheHeaviestExplanationThatSaysOtherwise) {
  auto model = std::make_shared<engine::Model>(*make_rig().model);
  model->channels.resize(2);
  model->channels[1].name = "radar";
  model->channels[1].unit = "m";
  rig::Rig rig;
  rig.model = model;
  engine::Estimate estimate = estimate_with(Condition::kOffset, 0.62);
  estimate.channels.push_back(estimate_with(Condition::kSound, 0.66).channels[0]);
  estimate.channels[1].trust = 0.66;
  estimate.explanations = {{0.6, {{0, Condition::kOffset, 0.18, 0.01}}},
                           {0.33, {{1, Condition::kCreeping, -0.17, 0.02}}},
                           {0.05, {}}};
  EXPECT_EQ(
      channel_words(rig, 0, estimate),
      "sonic reads +0.182 m off (90 %: +0.172 to +0.192), 62 %; or else radar creeping by -0.17 m, 33 %");
  EXPECT_EQ(rival_of(rig, 1, estimate).words, "radar creeping by -0.17 m");
  estimate.explanations.erase(estimate.explanations.begin() + 1);
  EXPECT_EQ(rival_of(rig, 0, estimate).words, "all channels sound");
  EXPECT_EQ(rival_of(rig, 0, estimate).probability, 0.05);
}

TEST(ChannelWords, TellNoiseThatHasGrownWithItsRivalAndSinceWhen) {
  engine::Estimate estimate = estimate_with(Condition::kSound, 0.98);
  engine::ChannelEstimate& channel = estimate.channels[0];
  channel.trust = 0.01;
  channel.noise_sd = 0.04;
  channel.noise_sd90 = {0.032, 0.049};
  EXPECT_EQ(
      words(estimate, kNow - 60'000'000'000),
      "sonic is noisy, 0.04 m, 10 times the datasheet's (90 %: 0.032 to 0.049), 98 %, for 60 s; nothing "
      "else above 1 %");
  estimate.explanations = {{0.98, {}}, {0.015, {{0, Condition::kWandering, 0.1, 0.05}}}};
  EXPECT_EQ(words(estimate),
            "sonic is noisy, 0.04 m, 10 times the datasheet's (90 %: 0.032 to 0.049), 98 %; or else sonic "
            "wandering by +0.10 m, 2 %");
}

// Whatever the numbers, a trust under one half comes with a rival and since when.
TEST(ChannelWords, NoTrustUnderOneHalfWithoutRivalAndSinceWhen) {
  for (int condition = 0; condition < engine::kConditions; ++condition) {
    for (double p = 0.2; p < 1.0; p += 0.1) {
      for (const double level : {0.05, 0.6, 1.0}) {
        engine::Estimate estimate = estimate_with(static_cast<Condition>(condition), p);
        estimate.channels[0].trust *= level;
        if (estimate.channels[0].trust >= 0.5) continue;
        const std::string text = words(estimate, kNow - 5'000'000'000);
        EXPECT_NE(text.find(", for 5 s; "), std::string::npos) << text;
        EXPECT_TRUE(text.find("; or else ") != std::string::npos ||
                    text.find("; nothing else above 1 %") != std::string::npos)
            << text;
      }
    }
  }
}

TEST(ChannelWords, OfAVectorChannelNameEachPart) {
  auto model = std::make_shared<engine::Model>(*make_rig().model);
  model->channels[0].others.resize(1);
  model->channels[0].others[0].unit = "km";
  model->channels[0].others[0].sd = 0.5;
  rig::Rig rig;
  rig.model = model;
  engine::Estimate estimate = estimate_with(Condition::kOffset, 0.97);
  estimate.channels[0].others.push_back({1.0, {0.8, 1.3}, -3.0, 0.5});
  EXPECT_EQ(channel_words(rig, 0, estimate),
            "sonic reads sonic.1 +0.182 m off (90 %: +0.172 to +0.192), sonic.2 -3.0 km off (90 %: -3.8 to "
            "-2.2), 97 %; nothing else above 1 %");
  estimate = estimate_with(Condition::kSound, 0.97);
  estimate.channels[0].others.push_back({1.0, {0.8, 1.3}, 0.0, 0.0});
  EXPECT_EQ(channel_words(rig, 0, estimate), "sonic is sound, 97 %, noise of sonic.2 1 km (datasheet 0.5)");
  const engine::Explanation both{
      0.9, {{0, Condition::kOffset, 0.18, 0.01, 0, 0}, {0, Condition::kOffset, -3.0, 0.5, 1, 0}}};
  EXPECT_EQ(explanation_words(rig, both, kNow),
            "sonic offset by +0.180 m (90 %: +0.164 to +0.196) / -3.0 km (90 %: -3.8 to -2.2)");
}

TEST(ChannelWords, ANegativeOffsetKeepsItsSign) {
  engine::Estimate estimate = estimate_with(Condition::kOffset, 0.97);
  estimate.channels[0].offset = -0.18234;
  EXPECT_EQ(words(estimate),
            "sonic reads -0.182 m off (90 %: -0.192 to -0.172), 97 %; nothing else above 1 %");
}

TEST(ChannelWords, AUnitOf1IsNotWritten) {
  auto model = std::make_shared<engine::Model>(*make_rig().model);
  model->channels[0].unit = "1";
  rig::Rig rig;
  rig.model = model;
  EXPECT_EQ(channel_words(rig, 0, estimate_with(Condition::kOffset, 0.97)),
            "sonic reads +0.182 off (90 %: +0.172 to +0.192), 97 %; nothing else above 1 %");
}

TEST(ChannelWords, TellNoiseWhereItIsAboveTheDatasheet) {
  engine::Estimate estimate = estimate_with(Condition::kSound, 1.0);
  estimate.channels[0].noise_sd = 0.0055;
  EXPECT_EQ(words(estimate), "sonic is sound, 100 %, noise 0.0055 m (datasheet 0.004)");
}

TEST(ChannelWords, TellTheLevelAtWhichAChannelIsStuck) {
  engine::Estimate estimate = estimate_with(Condition::kStuck, 0.98);
  estimate.explanations.push_back({0.9, {{0, Condition::kStuck, 2.1304, 0.002}}});
  EXPECT_EQ(words(estimate),
            "sonic is stuck at 2.130 m (90 %: 2.127 to 2.134), 98 %; nothing else above 1 %");
}

TEST(ChannelWords, TellSilenceBeforeTheCondition) {
  engine::Estimate estimate = estimate_with(Condition::kFrozen, 0.99);
  estimate.channels[0].silent = 0.97;
  estimate.channels[0].age_s = 42.9;
  EXPECT_EQ(words(estimate), "sonic is silent, 97 %, for 42 s; or else sonic only late, 3 %");
  estimate.channels[0].age_s = 7199.0;
  EXPECT_EQ(words(estimate), "sonic is silent, 97 %, for 119 min; or else sonic only late, 3 %");
  estimate.channels[0].age_s = -1.0;
  EXPECT_EQ(words(estimate), "sonic is silent, 97 %; or else sonic only late, 3 %");
}

TEST(ChannelWords, TellThatThereIsNoReadingYet) {
  engine::Estimate estimate = estimate_with(Condition::kSound, 0.99);
  estimate.channels[0].age_s = -1.0;
  EXPECT_EQ(words(estimate), "sonic has given no reading yet");
}

TEST(ExplanationWords, NameWhatIsUnsoundAndSinceWhen) {
  EXPECT_EQ(explanation_words(make_rig(), {0.9, {}}, kNow), "all channels are sound");
  const engine::Explanation offset{0.1,
                                   {{0, Condition::kOffset, 0.1834, 0.006, 0, kNow - 3'600'000'000'000}}};
  EXPECT_EQ(explanation_words(make_rig(), offset, kNow),
            "sonic offset by +0.183 m (90 %: +0.174 to +0.193) for 60 min");
  const engine::Explanation frozen{0.1, {{0, Condition::kFrozen, 2.0, 0.1, 0, 0}}};
  EXPECT_EQ(explanation_words(make_rig(), frozen, kNow), "sonic frozen");
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
