// SPDX-License-Identifier: Apache-2.0
// Small models with the parts of the method switched off that a textbook model lacks, and handy comparisons.
#pragma once

#include <cmath>
#include <memory>
#include <string>
#include <vector>

#include "engine/engine.h"

namespace steelyard::outside {

inline constexpr engine::TimeNs kSecond = 1'000'000'000;

/// A Kalman filter: one hypothesis, fixed precision, no strays, no modes, no evidence from repeats.
[[nodiscard]] engine::Model kalman_model();

/// A state with rate `rate` · x and this unrest; inputs do not act.
[[nodiscard]] engine::StateModel state(const std::string& name, double start, double start_sd, double unrest,
                                       std::vector<double> rate);

/// A channel that reads `weights` · x with noise sd `sd`: no strays, no resolution, a range never reached.
[[nodiscard]] engine::ChannelModel channel(const std::string& name, double sd, std::vector<double> weights);

[[nodiscard]] engine::Engine start(engine::Model model);
[[nodiscard]] engine::Estimate estimate(engine::Engine& engine, engine::TimeNs t,
                                        engine::Detail detail = engine::Detail::kBrief);
/// Fuses a good reading; fails the test if it is not fused.
void read(engine::Engine& engine, engine::TimeNs t, int channel, double value);

/// |a − b| over the greater magnitude; 0 for equal numbers.
[[nodiscard]] inline double relative(double a, double b) {
  const double scale = std::max(std::fabs(a), std::fabs(b));
  return scale > 0.0 ? std::fabs(a - b) / scale : 0.0;
}

}  // namespace steelyard::outside
