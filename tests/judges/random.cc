// SPDX-License-Identifier: Apache-2.0
#include "judges/random.h"

#include <cmath>

namespace steelyard::judges {

double Random::exponential(double mean) { return -mean * std::log(1.0 - uniform()); }

// Accepts at least 95 of 100 proposals; the bound on the loop is never met with a sound generator.
double Random::gamma(double shape) {
  const double d = shape - 1.0 / 3.0;
  const double c = 1.0 / std::sqrt(9.0 * d);
  for (int i = 0; i < 1000; ++i) {
    const double x = normal();
    const double v = std::pow(1.0 + c * x, 3);
    if (v <= 0.0) continue;
    if (std::log(1.0 - uniform()) < 0.5 * x * x + d - d * v + d * std::log(v)) return d * v;
  }
  return shape;
}

}  // namespace steelyard::judges
