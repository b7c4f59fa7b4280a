// SPDX-License-Identifier: Apache-2.0
// Changes and stretches, told from sequences of conditions. One channel, an estimate a second, joined over 5
// s.
#include "lib/log/stretches.h"

#include <gtest/gtest.h>

#include <string>
#include <vector>

namespace steelyard::client {
namespace {

using engine::TimeNs;
constexpr TimeNs kS = 1'000'000'000;

ChannelView view(char kind, double offset) {
  const std::string kinds = "scowtf";  // sound, creeping, offset, wandering, stuck, frozen
  ChannelView one;
  if (kind == '-') {
    one.silent = 0.9;
    one.probability[0] = 1.0;
    return one;
  }
  one.probability.fill(0.02);
  one.probability[kinds.find(kind)] = 0.9;
  one.offset = offset;
  one.offset_sd = 0.01;
  return one;
}

struct Told {
  std::vector<std::string> changes;  // "12 offset"
  std::vector<Stretch> stretches;
};

/// One letter a second.
Told follow(const std::string& kinds, double slope = 0.0) {
  Stretches stretches(1, 5 * kS);
  Told told;
  TimeNs t = 0;
  for (const char kind : kinds) {
    const std::vector<ChannelView> views{view(kind, slope * static_cast<double>(t))};
    stretches.add(
        t * kS, views, [](int) { return std::string("words"); },
        [&told](const Change& change) {
          EXPECT_EQ(change.words, "words");
          told.changes.push_back(std::to_string(change.time_ns / kS) + " " + kind_name(change.kind));
        });
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
  const auto count = [&changes](const Change&) { ++changes; };
  const TimeNs half = kS / 2;
  for (TimeNs i = 0; i < 30; ++i) {
    const std::vector<ChannelView> views{view(i == 4 ? 'o' : 's', 0.0)};
    stretches.add(i * half, views, {}, count);
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
  EXPECT_FALSE(told.stretches.front().has_size);
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
  EXPECT_TRUE(told.stretches.front().has_size);
  EXPECT_NEAR(told.stretches.front().size, -0.6, 1e-12);
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
  const std::vector<ChannelView> offset{view('o', 0.0)};
  const std::vector<ChannelView> sound{view('s', 0.0)};
  stretches.add(10 * kS, sound, {}, {});
  stretches.add(5 * kS, offset, {}, {});
  EXPECT_TRUE(stretches.finish().empty());
}

TEST(Stretches, WhatIsKeptIsBounded) {
  Stretches stretches(1, kS);
  const std::vector<ChannelView> offset{view('o', 0.0)};
  const std::vector<ChannelView> sound{view('s', 0.0)};
  TimeNs t = 0;
  for (std::size_t i = 0; i < Stretches::kMost + 7; ++i) {
    stretches.add(t, offset, {}, {});
    stretches.add(t + kS, sound, {}, {});
    stretches.add(t + 2 * kS, sound, {}, {});
    t += 3 * kS;
  }
  EXPECT_EQ(stretches.finish().size(), Stretches::kMost);
  EXPECT_EQ(stretches.left_out(), 7U);
}

TEST(StretchesText, NamesWhenWhatAndHowSure) {
  const Told told = follow("sssoooossssssss", 0.05);
  const std::vector<std::string> names{"sonic"};
  const std::vector<std::string> units{"m"};
  const auto time = [](TimeNs t) { return std::to_string(t / kS); };
  EXPECT_EQ(stretches_text(told.stretches, 2, names, units, time),
            "Stretches in which a channel was not sound:\n"
            "  sonic: from 3 to 7, offset, up to +0.300 ± 0.010 m, 90 % at its surest (not sound: 98 %)\n"
            "  … and 2 more\n");
  EXPECT_EQ(stretches_text({}, 0, names, units, time), "Every channel was sound throughout.\n");
}

}  // namespace
}  // namespace steelyard::client
