// SPDX-License-Identifier: Apache-2.0
// The filter to compare with: a Kalman filter that is told the fault, drops the channel meanwhile (knows the
// true noise where only that changes, skips the strays), with the constant process noise that fits a run
// without faults best. The "fixed" filter is the same one without that knowledge.
#pragma once

#include <vector>

#include "suite/faults.h"

namespace steelyard::suite {

// per √s: of 0.1 to 0.7 it fits the runs without faults best (RMSE 3.008 mm; 0.30 gives the same, 0.1 3.193,
// 0.7 3.028).
inline constexpr double kReferenceUnrest = 0.25;

struct Track {
  std::vector<double> position;
  std::vector<double> sd;
};

[[nodiscard]] Track reference(const Readings& readings, const Row& row, bool told,
                              double unrest = kReferenceUnrest);
[[nodiscard]] double rmse(const std::vector<double>& position, const Truth& truth);

/// First step that counts: after 6 % of the run.
inline constexpr int kFirst = kSteps * 6 / 100;

}  // namespace steelyard::suite
