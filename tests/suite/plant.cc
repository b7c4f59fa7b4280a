// SPDX-License-Identifier: Apache-2.0
#include "suite/plant.h"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace steelyard::suite {

double Random::uniform() { return static_cast<double>(engine_() >> 11U) * 0x1.0p-53; }

double Random::normal() {
  const double radius = std::sqrt(-2.0 * std::log(1.0 - uniform()));
  return radius * std::cos(2.0 * std::numbers::pi * uniform());
}

Truth simulate(std::uint64_t seed) {
  constexpr double kWind = 0.05;  // white acceleration, per √s
  Random random(seed);
  Truth truth;
  double position = 0.0;
  double speed = 0.0;
  double target = 0.0;
  double next_change = random.between(2.0, 5.0);
  for (int i = 0; i < kSteps; ++i) {
    truth.position.push_back(position);
    truth.speed.push_back(speed);
    if (i * kStepS >= next_change) {
      target = random.between(-3.0, 3.0);
      next_change += random.between(5.0, 11.0);
    }
    const double push = std::clamp(1.5 * (target - position) - 2.2 * speed, -1.2, 1.2);
    const double kick = kWind * std::sqrt(kStepS) * random.normal();
    position += speed * kStepS + 0.5 * (push * kStepS + kick) * kStepS;
    speed += push * kStepS + kick;
  }
  return truth;
}

}  // namespace steelyard::suite
