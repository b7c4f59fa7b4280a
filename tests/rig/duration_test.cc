// SPDX-License-Identifier: Apache-2.0
// Durations: every form, what is none, and the shortest form back.
#include <gtest/gtest.h>

#include <cmath>
#include <limits>
#include <optional>
#include <random>
#include <string_view>

#include "rig/rig.h"

namespace steelyard::rig {
namespace {

TEST(Duration, EveryUnitIsRead) {
  EXPECT_EQ(parse_duration_s("250 ms"), 0.25);
  EXPECT_EQ(parse_duration_s("1 ms"), 0.001);
  EXPECT_EQ(parse_duration_s("60 s"), 60.0);
  EXPECT_EQ(parse_duration_s("60s"), 60.0);
  EXPECT_EQ(parse_duration_s("0 s"), 0.0);
  EXPECT_EQ(parse_duration_s("1.5 min"), 90.0);
  EXPECT_EQ(parse_duration_s("2 h"), 7200.0);
  EXPECT_EQ(parse_duration_s("30 d"), 2592000.0);
  EXPECT_EQ(parse_duration_s("1e3 s"), 1000.0);
}

TEST(Duration, AnythingElseIsNone) {
  for (const std::string_view text :
       {"", "s", "60", "60 sec", "60 S", "-1 s", "+1 s", " 60 s", "60 s ", "1 h 30 min", "nan s", "inf s",
        "1e999 d", "0x10 s", "1,5 s", "60\ts", "60 m"}) {
    EXPECT_EQ(parse_duration_s(text), std::nullopt) << text;
  }
}

TEST(Duration, ShortestFormIsWritten) {
  EXPECT_EQ(duration_text(0.0), "0 s");
  EXPECT_EQ(duration_text(0.25), "250 ms");
  EXPECT_EQ(duration_text(0.0005), "0.5 ms");
  EXPECT_EQ(duration_text(1.0), "1 s");
  EXPECT_EQ(duration_text(90.0), "90 s");
  EXPECT_EQ(duration_text(60.0), "60 s");
  EXPECT_EQ(duration_text(600.0), "600 s");
  EXPECT_EQ(duration_text(1200.0), "20 min");
  EXPECT_EQ(duration_text(3600.0), "1 h");
  EXPECT_EQ(duration_text(5400.0), "1.5 h");
  EXPECT_EQ(duration_text(86400.0), "1 d");
  EXPECT_EQ(duration_text(2592000.0), "30 d");
}

TEST(Duration, WhatIsWrittenReadsBackAsTheSameNumber) {
  constexpr unsigned kSeed = 20240229;
  std::mt19937_64 random(kSeed);
  std::uniform_real_distribution<double> exponent(-6.0, 9.0);
  for (int i = 0; i < 2000; ++i) {
    const double seconds = std::pow(10.0, exponent(random));
    EXPECT_EQ(parse_duration_s(duration_text(seconds)), seconds) << "seed " << kSeed << ", " << seconds;
  }
  EXPECT_EQ(parse_duration_s(duration_text(std::numeric_limits<double>::max())),
            std::numeric_limits<double>::max());
}

}  // namespace
}  // namespace steelyard::rig
