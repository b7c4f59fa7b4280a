// SPDX-License-Identifier: Apache-2.0
// A small rig and logs of it for the tests of the command: a basin that fills slowly, two level gauges.
#pragma once

#include <cmath>
#include <cstdint>
#include <string>
#include <vector>

#include "lib/log/text.h"

namespace steelyard::client {

inline constexpr const char* kBasinRig = R"(rig: basin
response: 10 s
horizon: 30 s
states:
  level: {unit: m, start: 2, start_sd: 1, needs: 0.05}
  inflow: {unit: m3/s, start: 0.1, start_sd: 0.1}
inputs:
  pump: {unit: m3/s, start: 0, sd: 0.001, range: [0, 0.2]}
motion:
  level: (inflow - pump) / 10
unrest: {inflow: 0.002}
channels:
  sonic: {reads: level, sd: 0.01, bias_sd: 0.01, range: [0, 6], resolution: 0.001, period: 1 s}
  radar: {reads: level, sd: 0.01, bias_sd: 0.01, range: [0, 6], resolution: 0.001, period: 1 s}
)";

/// Rows of a long log without the header, a row a reading: `seconds` of it, in which sonic is 0.8 m off from
/// `fault_s` on (never, if that lies beyond the end). Noise from a fixed generator.
inline std::vector<std::string> basin_rows(int seconds, int fault_s) {
  std::vector<std::string> rows;
  std::uint64_t state = 20260105;
  const auto noise = [&state] {  // sum of four uniform numbers, sd 0.01
    double sum = 0.0;
    for (int i = 0; i < 4; ++i) {
      state = state * 6364136223846793005U + 1442695040888963407U;
      sum += static_cast<double>(state >> 11U) * 0x1p-53 - 0.5;
    }
    return sum * 0.01 * std::sqrt(3.0);
  };
  double level = 2.0;
  for (int s = 0; s < seconds; ++s) {
    const double pump = s / 60 % 2 == 1 ? 0.2 : 0.0;
    level += (0.1 - pump) / 10.0;
    const std::string time =
        time_text(1'700'000'000'000'000'000 + s * std::int64_t{1'000'000'000}, TimeStyle::kSeconds);
    const auto rounded = [](double value) {
      std::string text;
      append_number(text, std::round(value * 1000.0) / 1000.0);
      return text;
    };
    rows.push_back(time + ",pump," + rounded(pump));
    rows.push_back(time + ",sonic," + rounded(level + noise() + (s >= fault_s ? 0.8 : 0.0)));
    rows.push_back(time + ".25,radar," + rounded(level + noise()));
  }
  return rows;
}

inline std::string log_of(const std::vector<std::string>& rows) {
  std::string text = "time,channel,value\n";
  for (const std::string& row : rows) text += row + "\n";
  return text;
}

}  // namespace steelyard::client
