// SPDX-License-Identifier: Apache-2.0
#include "suite/random.h"

#include <cmath>
#include <numbers>

namespace steelyard::suite {

double Random::uniform() { return static_cast<double>(engine_() >> 11U) * 0x1.0p-53; }

double Random::normal() {
  const double radius = std::sqrt(-2.0 * std::log(1.0 - uniform()));
  return radius * std::cos(2.0 * std::numbers::pi * uniform());
}

}  // namespace steelyard::suite
