// SPDX-License-Identifier: Apache-2.0
// Random numbers that are the same on every platform: the standard fixes the engine but not the
// distributions.
#pragma once

#include <cstdint>
#include <random>

namespace steelyard::suite {

class Random {
 public:
  explicit Random(std::uint64_t seed) : engine_(seed) {}
  double uniform();  ///< in [0, 1)
  double between(double lo, double hi) { return lo + (hi - lo) * uniform(); }
  double normal();  ///< by Box & Muller (1958)

 private:
  std::mt19937_64 engine_;
};

}  // namespace steelyard::suite
