// SPDX-License-Identifier: Apache-2.0
// Random numbers that are the same with every standard library. The standard fixes what std::mt19937_64
// gives, but not what std::normal_distribution makes of it, so the transforms are our own.
#pragma once

#include <cstdint>
#include <random>

namespace steelyard::demo {

/// One independent stream of random numbers. Each sensor has a stream of its own, so that a change to one of
/// them leaves the others' noise as it was. One thread at a time.
class Random {
 public:
  Random(std::uint64_t seed, std::uint64_t stream);

  double uniform();                      ///< in [0, 1), 53 bits
  double uniform(double lo, double hi);  ///< in [lo, hi)
  int whole(int lo, int hi);             ///< each of lo … hi, both included
  double normal();                       ///< mean 0, sd 1
  bool chance(double probability);

 private:
  std::mt19937_64 bits_;
  double spare_ = 0.0;
  bool has_spare_ = false;
};

/// Ornstein-Uhlenbeck process: a wandering value with mean 0, sd 1 and a memory of `memory_s`.
class Wander {
 public:
  Wander(double memory_s, double step_s);
  double next(Random& random);

 private:
  double keep_;
  double push_;
  double value_ = 0.0;
};

}  // namespace steelyard::demo
