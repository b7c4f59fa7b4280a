// SPDX-License-Identifier: Apache-2.0
// Runs of the suite's axis with a double fault, and comparison of estimates bit by bit.
#pragma once

#include <bit>
#include <cmath>
#include <cstdint>
#include <vector>

#include "engine/engine.h"
#include "suite/trolley.h"

namespace steelyard::engine {

/// Offset on a and frozen d from 20 s to 40 s: walks, freezes, births and recoveries all occur.
[[nodiscard]] inline suite::Row double_fault() {
  return {"offset a, frozen d",
          {{0, suite::Kind::kOffset, 20.0}, {3, suite::Kind::kFrozen, 0.0}},
          {true, true, true, true},
          true};
}

[[nodiscard]] inline suite::Readings axis_readings(std::uint64_t seed) {
  return suite::read(suite::simulate(seed), double_fault(), seed);
}

[[nodiscard]] inline TimeNs axis_time(int step) { return 1'000'000'000LL + step * 20'000'000LL; }

/// Reads one moment's four readings; Machine is an Engine or a Posterior.
template <typename Machine>
void read_moment(Machine& machine, const suite::Readings& readings, int step) {
  for (std::size_t j = 0; j < suite::kChannels; ++j)
    machine.read(axis_time(step), static_cast<int>(j), readings.value[j][static_cast<std::size_t>(step)],
                 Quality::kGood);
}

/// Every number of an estimate, in a fixed order.
[[nodiscard]] inline std::vector<double> numbers(const Estimate& e) {
  std::vector<double> out;
  for (const auto& s : e.states)
    out.insert(out.end(),
               {s.mean, s.sd, s.interval90.lo, s.interval90.hi, s.two_peaked ? 1.0 : 0.0, s.within_needs});
  out.insert(out.end(), e.inputs.begin(), e.inputs.end());
  out.insert(out.end(), e.inputs_sd.begin(), e.inputs_sd.end());
  for (const auto& c : e.channels) {
    out.insert(out.end(), c.probability.begin(), c.probability.end());
    out.insert(out.end(), {c.trust, c.silent, c.noise_sd, c.noise_sd90.lo, c.noise_sd90.hi, c.offset,
                           c.offset_sd, c.influence, c.age_s, static_cast<double>(c.out_of_range)});
  }
  out.insert(out.end(), e.mode.begin(), e.mode.end());
  for (const auto& x : e.explanations) {
    out.push_back(x.probability);
    for (const auto& f : x.findings)
      out.insert(out.end(),
                 {static_cast<double>(f.channel), static_cast<double>(f.condition), f.offset, f.offset_sd});
  }
  out.push_back(e.hypotheses);
  return out;
}

[[nodiscard]] inline bool same_bits(const std::vector<double>& a, const std::vector<double>& b) {
  if (a.size() != b.size()) return false;
  for (std::size_t i = 0; i < a.size(); ++i)
    if (std::bit_cast<std::uint64_t>(a[i]) != std::bit_cast<std::uint64_t>(b[i])) return false;
  return true;
}

}  // namespace steelyard::engine
