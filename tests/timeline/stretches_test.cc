// SPDX-License-Identifier: Apache-2.0
// Changes and stretches, told from sequences of kinds. One channel, an estimate a second, joined over 5 s.
#include "timeline/stretches.h"

#include <gtest/gtest.h>

#include <string>
#include <vector>

namespace steelyard::timeline {
namespace {

using engine::TimeNs;
constexpr TimeNs kS = 1'000'000'000;

engine::ChannelEstimate channel(char kind, double offset) {
  const std::string kinds = "scowtf";  // sound, creeping, offset, wandering, stuck, frozen
  engine::ChannelEstimate one;
  one.age_s = 0.0;
  if (kind == '-' || kind == 'n') {  // silent, noisy
    one.silent = kind == '-' ? 0.9 : 0.0;
    one.trust = kind == 'n' ? 0.1 : 1.0;
    one.noise_sd = kind == 'n' ? 0.4 : 0.04;
    one.noise_sd90 = {0.8 * one.noise_sd, 1.2 * one.noise_sd};
    one.probability[0] = 1.0;
    return one;
  }
  one.trust = kind == 's' ? 0.9 : 0.02;
  one.probability.fill(0.02);
  one.probability[kinds.find(kind)] = 0.9;
  one.offset = offset;
  one.offset_sd = 0.01;
  return one;
}

engine::Estimate at(TimeNs time_ns, char kind, double offset = 0.0) {
  engine::Estimate estimate;
  estimate.time_ns = time_ns;
  estimate.channels.push_back(channel(kind, offset));
  return estimate;
}

struct Told {
  std::vector<std::string> changes;  // "12 offset"
  std::vector<Stretch> stretches;
};

/// One letter a second.
Told follow(const std::string& kinds, double slope = 0.0) {
  Stretches stretches(1, 5 * kS);
  Told told;
  Stretches::Calls calls;
  calls.words = [](int) { return std::string("words"); };
  calls.on_change = [&told](const Change& change) {
    EXPECT_EQ(change.words, "words");
    told.changes.push_back(std::to_string(change.time_ns / kS) + " " + kind_name(change.kind));
  };
  TimeNs t = 0;
  for (const char kind : kinds) {
    stretches.add(at(t * kS, kind, slope * static_cast<double>(t)), calls);
    ++t;
  }
  told.stretches = stretches.finish();
  return told;
}

using Lines = std::vector<std::string>;

TEST(Stretches, SoundThroughoutTellsNothing) {
  const Told told = follow("ssssssssss");
  EXPECT_EQ(told.changes, Lines{});
  EXPECT_TRUE(told.stretches.empty());
}

TEST(Stretches, TellsTheBeginningSoonAndTheEndWhenItLasts) {
  const Told told = follow("sssoooossssssss");
  EXPECT_EQ(told.changes, (Lines{"3 offset", "7 sound"}));
  ASSERT_EQ(told.stretches.size(), 1U);
  const Stretch& one = told.stretches.front();
  EXPECT_EQ(one.from_ns, 3 * kS);
  EXPECT_EQ(one.to_ns, 7 * kS);
  EXPECT_FALSE(one.open);
  EXPECT_STREQ(kind_name(one.kind), "offset");
  EXPECT_DOUBLE_EQ(one.probability, 0.9);
  EXPECT_DOUBLE_EQ(one.unsound, 0.98);
}

TEST(Stretches, JoinsShortReturnsToSound) {
  const Told told = follow("soossoossoosossssssss");
  EXPECT_EQ(told.changes, (Lines{"1 offset", "13 sound"}));
  ASSERT_EQ(told.stretches.size(), 1U);
  EXPECT_EQ(told.stretches.front().to_ns, 13 * kS);
}

TEST(Stretches, AFlickerIsAStretchButIsNotTold) {
  Stretches stretches(1, 5 * kS);
  std::size_t changes = 0;
  const Stretches::Calls calls{.on_change = [&changes](const Change&) { ++changes; }};
  const TimeNs half = kS / 2;
  for (TimeNs i = 0; i < 30; ++i) {
    stretches.add(at(i * half, i == 4 ? 'o' : 's'), calls);
  }
  EXPECT_EQ(changes, 0U);
  const std::vector<Stretch> all = stretches.finish();
  ASSERT_EQ(all.size(), 1U);
  EXPECT_TRUE(all.front().brief);
  const std::vector<std::string> names{"sonic"};
  EXPECT_EQ(stretches_text(all, 0, names, names, [](TimeNs) { return std::string(); }),
            "Stretches in which a channel was not sound:\n"
            "  sonic: 1 time for less than a fifth of the response time\n");
}

TEST(Stretches, DoesNotJoinOverALongerSoundTime) {
  const Told told = follow("sosssssssos");
  ASSERT_EQ(told.stretches.size(), 2U);
  EXPECT_EQ(told.stretches[0].from_ns, 1 * kS);
  EXPECT_EQ(told.stretches[0].to_ns, 2 * kS);
  EXPECT_EQ(told.stretches[1].from_ns, 9 * kS);
}

TEST(Stretches, JoinsUpToJustBelowTheJoinTime) {
  EXPECT_EQ(follow("sosssso").stretches.size(), 1U);
  EXPECT_EQ(follow("sossssso").stretches.size(), 2U);
}

TEST(Stretches, OneStillOpenEndsWithTheLastEstimate) {
  const Told told = follow("sssff");
  ASSERT_EQ(told.stretches.size(), 1U);
  EXPECT_TRUE(told.stretches.front().open);
  EXPECT_EQ(told.stretches.front().to_ns, 4 * kS);
  EXPECT_TRUE(told.stretches.front().sizes.empty());
}

TEST(Stretches, ChatterBetweenConditionsIsNotTold) {
  const Told told = follow("sotototototttttttt");
  EXPECT_EQ(told.changes, Lines{"10 stuck"});
  ASSERT_EQ(told.stretches.size(), 1U);
  EXPECT_STREQ(kind_name(told.stretches.front().kind), "stuck");
}

TEST(Stretches, AChangeOfAnOffsetsSpeedIsToldWhenItLastsLonger) {
  EXPECT_EQ(follow("soooo" + std::string(25, 'w')).changes, Lines{"1 offset"});
  EXPECT_EQ(follow("soooo" + std::string(26, 'w')).changes, (Lines{"1 offset", "5 wandering"}));
}

TEST(Stretches, TheKindIsTheOneThatLedLongest) {
  const Told told = follow("sccccccctt");
  ASSERT_EQ(told.stretches.size(), 1U);
  EXPECT_STREQ(kind_name(told.stretches.front().kind), "creeping");
}

TEST(Stretches, TheSizeIsTheLargest) {
  const Told told = follow("scccccc", -0.1);
  ASSERT_EQ(told.stretches.size(), 1U);
  ASSERT_EQ(told.stretches.front().sizes.size(), 1U);
  const Size& size = told.stretches.front().sizes.front();
  EXPECT_NEAR(size.size, -0.6, 1e-12);
  EXPECT_NEAR(size.lo, -0.6 - 0.0164485, 1e-6);  // 1.645 sd: 90 %
  EXPECT_NEAR(size.hi, -0.6 + 0.0164485, 1e-6);
}

TEST(Stretches, SilenceIsAKindOfItsOwn) {
  const Told told = follow("ss---ssssss");
  EXPECT_EQ(told.changes, (Lines{"2 silent", "5 sound"}));
  ASSERT_EQ(told.stretches.size(), 1U);
  EXPECT_STREQ(kind_name(told.stretches.front().kind), "silent");
  EXPECT_DOUBLE_EQ(told.stretches.front().unsound, 0.9);
}

TEST(Stretches, AFirstEstimateThatIsNotSoundIsTold) { EXPECT_EQ(follow("oo").changes, Lines{"0 offset"}); }

TEST(Stretches, TimesThatFallAreIgnored) {
  Stretches stretches(1, kS);
  stretches.add(at(10 * kS, 's'), {});
  stretches.add(at(5 * kS, 'o'), {});
  EXPECT_TRUE(stretches.finish().empty());
}

TEST(Stretches, WhatIsKeptIsBounded) {
  Stretches stretches(1, kS);
  TimeNs t = 0;
  for (std::size_t i = 0; i < Stretches::kMost + 7; ++i) {
    stretches.add(at(t, 'o'), {});
    stretches.add(at(t + kS, 's'), {});
    stretches.add(at(t + 2 * kS, 's'), {});
    t += 3 * kS;
  }
  EXPECT_EQ(stretches.finish().size(), Stretches::kMost);
  EXPECT_EQ(stretches.left_out(), 7U);
}

TEST(Stretches, GrownNoiseIsAKindOfItsOwn) {
  const Told told = follow("ssnnnssssss");
  EXPECT_EQ(told.changes, (Lines{"2 noisy", "5 sound"}));
  ASSERT_EQ(told.stretches.size(), 1U);
  EXPECT_STREQ(kind_name(told.stretches.front().kind), "noisy");
  ASSERT_EQ(told.stretches.front().sizes.size(), 1U);
  EXPECT_EQ(told.stretches.front().sizes[0].size, 0.4);
  EXPECT_EQ(told.stretches.front().sizes[0].lo, 0.8 * 0.4);
  const std::vector<std::string> names{"m"};
  EXPECT_EQ(stretches_text(told.stretches, 0, names, names, [](TimeNs t) { return std::to_string(t / kS); }),
            "Stretches in which a channel was not sound:\n"
            "  m: from 2 to 5, noisy, up to 0.40 m (90 %: 0.32 to 0.48), 100 % at its surest\n");
}

// The engine says when a spell began, which is before it came to believe in it; not before the one before.
TEST(Stretches, BeginWhenTheEngineSaysThatTheyDid) {
  Stretches stretches(1, 5 * kS);
  const std::string kinds = "sssoossssssoo";
  for (std::size_t i = 0; i < kinds.size(); ++i) {
    engine::Estimate estimate = at(static_cast<TimeNs>(i) * kS, kinds[i]);
    estimate.channels[0].unsound_since_ns = kS;
    stretches.add(estimate, {});
    EXPECT_EQ(stretches.since(0), i < 3 ? 0 : i < 5 ? 3 * kS : i < 11 ? 0 : 11 * kS) << i;
  }
  const std::vector<Stretch> all = stretches.finish();
  ASSERT_EQ(all.size(), 2U);
  EXPECT_EQ(all[0].from_ns, 1 * kS);
  EXPECT_EQ(all[1].from_ns, all[0].to_ns);
}

// A flicker of doubt knows no beginning.
TEST(Stretches, ABriefOneBeginsWhereItWasSeen) {
  Stretches stretches(1, 50 * kS);
  for (TimeNs t = 0; t < 80; ++t) {
    engine::Estimate estimate = at(t * kS, t == 20 ? 'o' : 's');
    estimate.channels[0].unsound_since_ns = kS;
    stretches.add(estimate, {});
  }
  const std::vector<Stretch> all = stretches.finish();
  ASSERT_EQ(all.size(), 1U);
  EXPECT_TRUE(all[0].brief);
  EXPECT_EQ(all[0].from_ns, 20 * kS);
}

TEST(Stretches, AskForTheFullEstimateAndTheRivalWhereTheyAreSurest) {
  Stretches stretches(1, 5 * kS);
  engine::Estimate full;
  int asked = 0;
  Stretches::Calls calls;
  calls.full = [&]() -> const engine::Estimate& { return full; };
  calls.rival = [&](int) {
    ++asked;
    return Rival{"radar creeping", 0.07};
  };
  for (TimeNs t = 0; t < 20; ++t) {
    const engine::Estimate estimate = at(t * kS, t < 10 ? 's' : 't');
    full = estimate;
    full.explanations.push_back({0.9, {{0, engine::Condition::kStuck, 1.5, 0.1}}});
    stretches.add(estimate, calls);
  }
  EXPECT_EQ(asked, 1);
  const std::vector<Stretch> all = stretches.finish();
  ASSERT_EQ(all.size(), 1U);
  EXPECT_EQ(all[0].rival.words, "radar creeping");
  EXPECT_EQ(all[0].rival.probability, 0.07);
  EXPECT_EQ(all[0].then, 0.9);
  ASSERT_EQ(all[0].sizes.size(), 1U);
  EXPECT_EQ(all[0].sizes[0].size, 1.5);
}

TEST(Stretches, OfAVectorChannelHaveASizeForEachPart) {
  Stretches stretches(1, 5 * kS);
  for (TimeNs t = 0; t < 9; ++t) {
    engine::Estimate estimate = at(t * kS, t < 3 ? 's' : 'o', 0.1);
    estimate.channels[0].others.push_back({1.0, {}, t == 5 ? -3.0 : -2.0, 0.5});
    stretches.add(estimate, {});
  }
  const std::vector<Stretch> all = stretches.finish();
  ASSERT_EQ(all.size(), 1U);
  ASSERT_EQ(all[0].sizes.size(), 2U);
  EXPECT_EQ(all[0].sizes[0].size, 0.1);
  EXPECT_EQ(all[0].sizes[1].size, -3.0) << "the largest, all parts together";
}

TEST(Stretches, MayKeepNoneAndStillSaySinceWhen) {
  Stretches stretches(1, kS, 0);
  stretches.add(at(kS, 'o'), {});
  EXPECT_EQ(stretches.since(0), kS);
  EXPECT_TRUE(stretches.finish().empty());
}

TEST(StretchesText, NamesWhenWhatAndHowSure) {
  const Told told = follow("sssoooossssssss", 0.05);
  const std::vector<std::string> names{"sonic"};
  const std::vector<std::string> units{"m"};
  const auto time = [](TimeNs t) { return std::to_string(t / kS); };
  EXPECT_EQ(stretches_text(told.stretches, 2, names, units, time),
            "Stretches in which a channel was not sound:\n"
            "  sonic: from 3 to 7, offset, up to +0.300 m (90 %: +0.284 to +0.316), 90 % at its surest (not "
            "sound: 98 %)\n"
            "  … and 2 more\n");
  EXPECT_EQ(stretches_text({}, 0, names, units, time), "Every channel was sound throughout.\n");
}

}  // namespace
}  // namespace steelyard::timeline
