// SPDX-License-Identifier: Apache-2.0
// Times and numbers as text: exact, whatever the locale.
#include "lib/log/text.h"

#include <gtest/gtest.h>

#include <array>
#include <bit>
#include <clocale>
#include <cmath>
#include <cstdint>
#include <limits>
#include <random>

namespace steelyard::client {
namespace {

using engine::TimeNs;

struct TimeCase {
  const char* text;
  std::optional<TimeNs> ns;
};

constexpr TimeNs kMost = std::numeric_limits<TimeNs>::max();
constexpr TimeNs kLeast = std::numeric_limits<TimeNs>::min();

const TimeCase kTimes[] = {
    // decimal seconds
    {"0", 0},
    {"1", 1'000'000'000},
    {"1700000000.123456789", 1'700'000'000'123'456'789},
    {"1700000000.1", 1'700'000'000'100'000'000},
    {"00012", 12'000'000'000},
    {".5", 500'000'000},
    {"5.", 5'000'000'000},
    {"+3", 3'000'000'000},
    {"-0.5", -500'000'000},
    {"-1.000000001", -1'000'000'001},
    // beyond the nanosecond: to the nearest
    {"0.0000000004", 0},
    {"0.0000000005", 1},
    {"0.9999999999", 1'000'000'000},
    // the ends of what 64 bits can tell
    {"9223372036.854775807", kMost},
    {"-9223372036.854775808", kLeast},
    {"9223372036.854775808", std::nullopt},
    {"-9223372036.854775809", std::nullopt},
    {"99999999999999999999999999", std::nullopt},
    // RFC 3339; the first three are the examples of its section 5.8
    {"1985-04-12T23:20:50.52Z", 482196050'520'000'000},
    {"1996-12-19T16:39:57-08:00", 851042397'000'000'000},
    {"1990-12-31T23:59:60Z", 662688000'000'000'000},
    {"1990-12-31T15:59:60-08:00", 662688000'000'000'000},
    {"1970-01-01T00:00:00Z", 0},
    {"1969-12-31T23:59:59.999999999Z", -1},
    {"2024-02-29T12:00:00+01:00", 1709204400'000'000'000},
    {"2024-02-29 11:00:00z", 1709204400'000'000'000},
    // neither
    {"", std::nullopt},
    {".", std::nullopt},
    {"-", std::nullopt},
    {"abc", std::nullopt},
    {"1e9", std::nullopt},
    {"1 ", std::nullopt},
    {" 1", std::nullopt},
    {"1,5", std::nullopt},
    {"nan", std::nullopt},
    {"--1", std::nullopt},
    {"2023-02-29T00:00:00Z", std::nullopt},
    {"2023-13-01T00:00:00Z", std::nullopt},
    {"2023-01-32T00:00:00Z", std::nullopt},
    {"2023-01-01T24:00:00Z", std::nullopt},
    {"2023-01-01T00:60:00Z", std::nullopt},
    {"2023-01-01T12:00:60Z", std::nullopt},
    {"2023-01-01T00:00:00", std::nullopt},
    {"2023-01-01T00:00:00.Z", std::nullopt},
    {"2023-01-01T00:00:00+1:00", std::nullopt},
    {"2023-01-01T00:00:00+24:00", std::nullopt},
    {"2023-01-01T00:00:00Zx", std::nullopt},
    {"2023-01-01", std::nullopt},
    {"0001-01-01T00:00:00Z", std::nullopt},
    {"9999-12-31T23:59:59Z", std::nullopt},
};

TEST(ParseTime, TakesBothFormsExactly) {
  for (const TimeCase& one : kTimes) EXPECT_EQ(parse_time(one.text), one.ns) << one.text;
}

TEST(TimeText, CutsTrailingZeros) {
  EXPECT_EQ(time_text(0, TimeStyle::kSeconds), "0");
  EXPECT_EQ(time_text(1'500'000'000, TimeStyle::kSeconds), "1.5");
  EXPECT_EQ(time_text(-1, TimeStyle::kSeconds), "-0.000000001");
  EXPECT_EQ(time_text(kLeast, TimeStyle::kSeconds), "-9223372036.854775808");
  EXPECT_EQ(time_text(482196050'520'000'000, TimeStyle::kRfc3339), "1985-04-12T23:20:50.52Z");
  EXPECT_EQ(time_text(-1, TimeStyle::kRfc3339), "1969-12-31T23:59:59.999999999Z");
  EXPECT_EQ(time_text(kLeast, TimeStyle::kRfc3339), "1677-09-21T00:12:43.145224192Z");
}

TEST(TimeText, ReadsBackAsTheSameTime) {
  std::mt19937_64 random(20260101);
  for (int i = 0; i < 20000; ++i) {
    const auto ns = static_cast<TimeNs>(random());
    EXPECT_EQ(parse_time(time_text(ns, TimeStyle::kSeconds)), ns);
    EXPECT_EQ(parse_time(time_text(ns, TimeStyle::kRfc3339)), ns);
  }
}

TEST(ParseNumber, TakesDecimalNumbersAlone) {
  EXPECT_EQ(parse_number("1.5"), 1.5);
  EXPECT_EQ(parse_number("+1.5"), 1.5);
  EXPECT_EQ(parse_number("-2e-3"), -0.002);
  EXPECT_EQ(parse_number("1e-400"), 0.0);
  EXPECT_TRUE(std::isinf(parse_number("1e999").value()));
  EXPECT_TRUE(std::isnan(parse_number("nan").value()));
  EXPECT_TRUE(std::isinf(parse_number("-inf").value()));
  for (const char* wrong : {"", "abc", "1,5", "1.5 ", " 1.5", "+-1", "+", "0x10", "1.5m", "--1"}) {
    EXPECT_EQ(parse_number(wrong), std::nullopt) << wrong;
  }
}

TEST(AppendNumber, ReadsBackAsTheSameBits) {
  std::mt19937_64 random(20260102);
  for (int i = 0; i < 20000; ++i) {
    const auto value = std::bit_cast<double>(static_cast<std::uint64_t>(random()));
    if (!std::isfinite(value)) continue;
    std::string text;
    append_number(text, value);
    EXPECT_EQ(std::bit_cast<std::uint64_t>(parse_number(text).value()), std::bit_cast<std::uint64_t>(value))
        << text;
  }
}

TEST(Numbers, DoNotFollowTheLocale) {
  const char* const before =
      std::setlocale(LC_ALL, "de_DE.UTF-8");  // not on every machine; then nothing changes
  std::string text;
  append_number(text, 1234.5);
  EXPECT_EQ(text, "1234.5");
  EXPECT_EQ(parse_number("1234.5"), 1234.5);
  std::setlocale(LC_ALL, "C");
  (void)before;
}

TEST(Shown, CutsAndCleans) {
  EXPECT_EQ(shown("abc"), "\"abc\"");
  EXPECT_EQ(shown("a\x1b[2J\n"), "\"a?[2J?\"");
  EXPECT_EQ(shown(std::string(41, 'x')), "\"" + std::string(40, 'x') + "…\"");
  EXPECT_EQ(shown("äöü"), "\"äöü\"");
}

}  // namespace
}  // namespace steelyard::client
