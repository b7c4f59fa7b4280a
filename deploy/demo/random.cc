// SPDX-License-Identifier: Apache-2.0
// See random.h.
#include "random.h"

#include <cmath>

namespace steelyard::demo {

namespace {

constexpr std::uint64_t kStreamStep =
    0x9E3779B97F4A7C15ULL;  // 2^64 / golden ratio: spreads the streams' seeds

}  // namespace

Random::Random(std::uint64_t seed, std::uint64_t stream) : bits_(seed + kStreamStep * (stream + 1)) {}

double Random::uniform() { return static_cast<double>(bits_() >> 11) * 0x1.0p-53; }

double Random::uniform(double lo, double hi) { return lo + (hi - lo) * uniform(); }

int Random::whole(int lo, int hi) { return lo + static_cast<int>(uniform() * (hi - lo + 1)); }

bool Random::chance(double probability) { return uniform() < probability; }

// Marsaglia's polar method (Marsaglia & Bray 1964). Of the mathematics library it uses log alone, whose last
// bit may differ between machines; readings are rounded to counts, which hides that.
double Random::normal() {
  if (has_spare_) {
    has_spare_ = false;
    return spare_;
  }
  double u = 0.0;
  double v = 0.0;
  double s = 0.0;
  do {
    u = uniform(-1.0, 1.0);
    v = uniform(-1.0, 1.0);
    s = u * u + v * v;
  } while (s >= 1.0 || s == 0.0);
  const double scale = std::sqrt(-2.0 * std::log(s) / s);
  spare_ = v * scale;
  has_spare_ = true;
  return u * scale;
}

Wander::Wander(double memory_s, double step_s)
    : keep_(std::exp(-step_s / memory_s)), push_(std::sqrt(1.0 - keep_ * keep_)) {}

double Wander::next(Random& random) {
  value_ = keep_ * value_ + push_ * random.normal();
  return value_;
}

}  // namespace steelyard::demo
