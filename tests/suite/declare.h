// SPDX-License-Identifier: Apache-2.0
// The engine's model of a machine in a row: what the rig would say.
#pragma once

#include <memory>

#include "suite/machine.h"

namespace steelyard::suite {

struct Settings {
  int seeds = 3;
  double fails_every_h = 30 * 24.0;
  int budget_factor = 1;
  int parents_factor = 1;
};

[[nodiscard]] std::shared_ptr<engine::Model> declare(const Machine& machine, const Row& row,
                                                     const Settings& settings);

/// A channel's number in the row's model by its number in the machine; −1: absent.
[[nodiscard]] std::vector<int> numbers(const Machine& machine, const Row& row);

}  // namespace steelyard::suite
