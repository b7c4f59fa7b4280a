// SPDX-License-Identifier: Apache-2.0
// Which constant process noise fits a machine's runs without faults best.
#pragma once

#include "suite/machine.h"

namespace steelyard::suite {

/// Error of the fixed filter with this process noise, over seeds 1 to `seeds` without faults: root mean
/// square over the judged states, each as a multiple of its scale.
[[nodiscard]] double fit_error(const Machine& machine, const Vector& unrest, int seeds);

/// Searches from the machine's own values by coordinates (factors 2, √2, 2^¼), with a line for each
/// improvement.
void print_fit(const Machine& machine, int seeds);

}  // namespace steelyard::suite
