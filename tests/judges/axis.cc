// SPDX-License-Identifier: Apache-2.0
#include "judges/axis.h"

#include <algorithm>
#include <cmath>

namespace steelyard::judges {
namespace {

constexpr double kWind = 0.05;        // white acceleration, per √s
constexpr double kJoltEveryS = 60.0;  // mean
constexpr double kRestBeforeJoltsS = 5.0;

}  // namespace

Axis::Axis(std::uint64_t seed, bool jolts)
    : random_(seed),
      jolts_(jolts),
      next_target_s_(random_.between(2.0, 5.0)),
      next_jolt_s_(kRestBeforeJoltsS + random_.exponential(kJoltEveryS)) {}

// The controller's push: towards the set-point, at most 1.2 of acceleration.
double Axis::push() {
  if (time_s_ >= next_target_s_) {
    target_ = random_.between(-3.0, 3.0);
    next_target_s_ += random_.between(5.0, 11.0);
  }
  return std::clamp(1.5 * (target_ - position_) - 2.2 * speed_, -1.2, 1.2);
}

// Something knocks against the load: half a second to two of a push up to the controller's own, and shaking.
double Axis::jolt() {
  if (jolts_ && time_s_ >= next_jolt_s_) {
    jolt_ends_s_ = time_s_ + random_.between(0.5, 2.0);
    jolt_push_ = random_.between(-1.2, 1.2);
    next_jolt_s_ = jolt_ends_s_ + random_.exponential(kJoltEveryS);
  }
  return time_s_ < jolt_ends_s_ ? jolt_push_ : 0.0;
}

void Axis::step() {
  const double knock = jolt();
  const double acceleration = push() + knock;
  const double wind = time_s_ < jolt_ends_s_ ? 0.5 : kWind;
  const double kick = wind * std::sqrt(kStepS) * random_.normal();
  position_ += speed_ * kStepS + 0.5 * (acceleration * kStepS + kick) * kStepS;
  speed_ += acceleration * kStepS + kick;
  time_s_ += kStepS;
  for (int j = 0; j < kChannels; ++j) {
    const auto u = static_cast<std::size_t>(j);
    readings_[u] = as_read(j, (j == 3 ? speed_ : position_) + kSd[u] * random_.normal());
  }
}

double Axis::as_read(int channel, double value) {
  const double range = kRange[static_cast<std::size_t>(channel)];
  return std::clamp(std::round(value / kResolution) * kResolution, -range, range);
}

std::shared_ptr<engine::Model> axis_model() {
  using engine::AffineForm;
  auto model = std::make_shared<engine::Model>();
  model->states = {{"position", "m", 0.0, 1.0, 0.0, {}, AffineForm{{0, 1}, {}, 0}},
                   {"speed", "m/s", 0.0, 1.0, 0.22, {}, AffineForm{{0, 0}, {}, 0}}};
  for (int j = 0; j < Axis::kChannels; ++j) {
    const auto u = static_cast<std::size_t>(j);
    engine::ChannelModel c;
    c.name = Axis::kNames[u];
    c.reads = AffineForm{j == 3 ? std::vector<double>{0, 1} : std::vector<double>{1, 0}, {}, 0};
    c.sd = Axis::kSd[u];
    c.lo = -Axis::kRange[u];
    c.hi = Axis::kRange[u];
    c.resolution = Axis::kResolution;
    model->channels.push_back(std::move(c));
  }
  engine::set_defaults(*model, 1.0);
  return model;
}

}  // namespace steelyard::judges
