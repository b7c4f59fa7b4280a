// SPDX-License-Identifier: Apache-2.0
// The filter to compare with: a Kalman filter that is told the fault, drops the channel meanwhile (knows the
// true noise where only that changes, skips the strays), with the constant process noise that fits a run
// without faults best. The "fixed" filter is the same one without that knowledge.
#pragma once

#include <vector>

#include "suite/faults.h"

namespace steelyard::suite {

inline constexpr double kReferenceUnrest = 0.25;  // per √s; see best_unrest()

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
