// SPDX-License-Identifier: Apache-2.0
// The trolley in few words, for tests of other rooms.
#pragma once

#include <array>

#include "suite/declare.h"
#include "suite/faults.h"
#include "suite/random.h"

namespace steelyard::suite {

inline constexpr int kChannels = 4;
inline constexpr int kSteps = 3000;
inline constexpr double kStepS = 0.02;
inline constexpr std::array<double, kChannels> kSd{0.01, 0.03, 0.05, 0.05};

[[nodiscard]] Truth simulate(std::uint64_t seed);
/// `row` need not be resolved.
[[nodiscard]] Readings read(const Truth& truth, const Row& row, std::uint64_t seed);
[[nodiscard]] std::shared_ptr<engine::Model> axis_model(const Settings& settings, const Row& row);
[[nodiscard]] const std::vector<Row>& table();

/// Estimates of the position by step, m.
struct Positions {
  std::vector<double> position;
  std::vector<double> sd;
};
/// Of the filter that is told the fault, or of the fixed one, with this process noise on the speed (per √s).
[[nodiscard]] Positions reference(const Readings& readings, const Row& row, bool told, double unrest = 0.25);
/// Over the steps that count.
[[nodiscard]] double rmse(const std::vector<double>& position, const Truth& truth);

}  // namespace steelyard::suite
