// SPDX-License-Identifier: Apache-2.0
// The suite's random numbers, with the distributions that a machine drawn from the engine's prior needs
// besides.
#pragma once

#include "suite/random.h"

namespace steelyard::judges {

class Random : public suite::Random {
 public:
  using suite::Random::Random;
  double exponential(double mean);  ///< waiting time
  double gamma(double shape);       ///< rate 1, shape ≥ 1; by Marsaglia & Tsang (2000)
  bool chance(double probability) { return uniform() < probability; }
};

}  // namespace steelyard::judges
