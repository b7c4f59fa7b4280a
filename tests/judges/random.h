// SPDX-License-Identifier: Apache-2.0
// Random numbers that are the same on every platform: the standard fixes the engine but not the
// distributions.
#pragma once

#include <cstdint>
#include <random>

namespace steelyard::judges {

class Random {
 public:
  explicit Random(std::uint64_t seed) : engine_(seed) {}
  double uniform();  ///< in [0, 1)
  double between(double lo, double hi) { return lo + (hi - lo) * uniform(); }
  double normal();                  ///< by Box & Muller (1958)
  double exponential(double mean);  ///< waiting time
  double gamma(double shape);       ///< rate 1, shape ≥ 1; by Marsaglia & Tsang (2000)
  bool chance(double probability) { return uniform() < probability; }

 private:
  std::mt19937_64 engine_;
};

}  // namespace steelyard::judges
