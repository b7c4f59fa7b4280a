// SPDX-License-Identifier: Apache-2.0
// One row of the table: the engine and the reference filters on the same readings.
#pragma once

#include <array>

#include "engine/engine.h"
#include "suite/faults.h"
#include "suite/reference.h"

namespace steelyard::suite {

struct Settings {
  int seeds = 3;
  double fails_every_h = 30 * 24.0;
  int budget_factor = 1;
  int parents_factor = 1;
};

struct Result {
  double engine = 0.0;     ///< RMSE over the told reference's
  double fixed = 0.0;      ///< the same filter without that knowledge
  double coverage = 0.0;   ///< |error| < 1.96 stated sd
  double wronged = 0.0;    ///< largest share of time in which a healthy channel's trust is under 0.5
  double mid_trust = 1.0;  ///< highest trust of a faulty channel at mid-fault, mean over seeds
  double hypotheses = 0.0;
  double us_per_reading = 0.0;
};

[[nodiscard]] std::shared_ptr<engine::Model> axis_model(const Settings& settings, const Row& row);
[[nodiscard]] Result run(const Row& row, const Settings& settings);

}  // namespace steelyard::suite
