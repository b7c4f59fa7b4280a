// SPDX-License-Identifier: Apache-2.0
// What must hold. A bound is a promise of the project; it is never loosened to let a row pass.
#pragma once

#include <string>
#include <vector>

#include "suite/runner.h"

namespace steelyard::suite {

/// Names of the bounds that a row breaks, with the bound's value; empty: it holds.
[[nodiscard]] std::vector<std::string> breaches(const Result& result);

/// Geometric means of a machine's rows (those whose class has a bound on the error).
struct Summary {
  const Machine* machine = nullptr;
  int rows = 0;
  int broken = 0;
  double to_told = 1.0;
  double to_informed = 1.0;
  std::array<double, kReferences> others{};
  double worst = 0.0;
  const Row* worst_row = nullptr;
  double us_per_reading = 0.0;
};

[[nodiscard]] Summary summarise(const Machine& machine, const std::vector<Result>& results);
[[nodiscard]] std::vector<std::string> breaches(const Summary& summary);

/// Is the error of such rows bounded, and by how much?
[[nodiscard]] double error_bound(Class what);  ///< infinity: not bounded
[[nodiscard]] double lowest_coverage(const Result& result);

}  // namespace steelyard::suite
