// SPDX-License-Identifier: Apache-2.0
// The right description that the tests of this folder start from, and small verbs on it.
#pragma once

#include <gtest/gtest.h>

#include <string>
#include <string_view>

#include "rig/rig.h"

namespace steelyard::rig {

// Its lines and columns stand in the tests: change nothing above the end.
inline constexpr std::string_view kBasin = R"(rig: basin
response: 60 s
constants: {area: 120}
states:
  level:  {unit: m, start: 2, start_sd: 2, needs: 0.05}
  inflow: {unit: m3/s, start: 0.1, start_sd: 0.2}
inputs:
  pump: {unit: m3/s, start: 0, sd: 0.003, period: 1 s, range: [0, 0.15]}
motion:
  level: (inflow - pump) / area
unrest: {inflow: 0.002}
jolts: {every: 20 min, last: 1 min, times: 5}
channels:
  sonic: {reads: level, sd: 0.004, range: [0, 6], resolution: 0.001}
  meter:
    reads: inflow
    sd: 0.001 + 0.02*abs(inflow)
    range: [0, 0.5]
    cutoff: 0.005
)";

/// kBasin with the first `from` turned into `to`.
inline std::string basin_with(std::string_view from, std::string_view to) {
  std::string text(kBasin);
  const std::size_t at = text.find(from);
  EXPECT_NE(at, std::string::npos) << from;
  return at == std::string::npos ? text : text.replace(at, from.size(), to);
}

/// All problems, one a line.
inline std::string problems_of(std::string_view text) {
  std::string out;
  for (const Problem& problem : load(text, "basin.yaml").problems) out += problem.text() + "\n";
  return out;
}

}  // namespace steelyard::rig
