// SPDX-License-Identifier: Apache-2.0
#include "judges/basin.h"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace steelyard::judges {
namespace {

constexpr double kAreaM2 = 120.0;
constexpr double kDayS = 86400.0;
// Level gauges in m, the meter in m³/s.
constexpr std::array<double, Basin::kChannels> kSd{0.004, 0.003, 0.002, 0.002};
constexpr std::array<double, Basin::kChannels> kBiasSd{0.01, 0.005, 0.01, 0.001};
constexpr std::array<double, Basin::kChannels> kTop{6.0, 6.0, 6.0, 0.5};
constexpr std::array<double, Basin::kChannels> kResolution{0.001, 0.001, 0.001, 0.0001};

}  // namespace

Basin::Basin(std::uint64_t seed)
    : random_(seed),
      next_sluice_s_(random_.exponential(2400.0)),
      next_target_s_(random_.between(600.0, 1200.0)) {
  for (std::size_t j = 0; j < kChannels; ++j) bias_[j] = kBiasSd[j] * random_.normal();
}

// A daily round, slow wandering (time constant 20 min), and about once in 40 min a sluice that opens within
// seconds for 2 to 15 minutes: the jolt.
void Basin::flow_in() {
  if (time_s_ >= next_sluice_s_) {
    sluice_m3s_ = random_.between(0.02, 0.10);
    sluice_closes_s_ = time_s_ + random_.between(120.0, 900.0);
    next_sluice_s_ = sluice_closes_s_ + random_.exponential(2400.0);
  }
  const double wanted = time_s_ < sluice_closes_s_ ? sluice_m3s_ : 0.0;
  wander_m3s_ += -wander_m3s_ / 1200.0 + 0.0005 * random_.normal();
  const double round = 0.10 + 0.04 * std::sin(2.0 * std::numbers::pi * time_s_ / kDayS);
  const double steady = std::max(0.02, round + wander_m3s_) + wanted;
  inflow_m3s_ += (steady - inflow_m3s_) / 10.0;
}

// Proportional control of the level, at most 0.006 m³/s each second.
void Basin::pump() {
  if (time_s_ >= next_target_s_) {
    target_m_ = random_.between(1.0, 3.5);
    next_target_s_ += random_.between(1200.0, 3600.0);
  }
  const double wanted = std::clamp(0.1 + 0.2 * (level_m_ - target_m_), 0.0, 0.30);
  pump_m3s_ += std::clamp(wanted - pump_m3s_, -0.006, 0.006);
}

void Basin::read() {
  for (std::size_t j = 0; j < kChannels; ++j) {
    const double value = (j == 3 ? inflow_m3s_ : level_m_) + bias_[j] + kSd[j] * random_.normal();
    readings_[j] = std::clamp(std::round(value / kResolution[j]) * kResolution[j], 0.0, kTop[j]);
  }
}

void Basin::step() {
  flow_in();
  pump();
  level_m_ = std::max(0.0, level_m_ + (inflow_m3s_ - pump_m3s_) / kAreaM2);
  time_s_ += 1.0;
  read();
}

std::shared_ptr<engine::Model> basin_model() {
  using engine::AffineForm;
  auto model = std::make_shared<engine::Model>();
  model->states = {{"level", "m", 2.0, 2.0, 0.0, {}, AffineForm{{0.0, 1.0 / kAreaM2}, {-1.0 / kAreaM2}, 0.0}},
                   {"inflow", "m3/s", 0.1, 0.1, 0.002, {}, AffineForm{{0.0, 0.0}, {0.0}, 0.0}}};
  engine::InputModel pumped;
  pumped.name = "pump";
  pumped.start = 0.1;
  pumped.sd = 0.003;
  pumped.period_s = 5.0;
  pumped.hi = 0.3;
  model->inputs.push_back(pumped);
  for (std::size_t j = 0; j < Basin::kChannels; ++j) {
    engine::ChannelModel c;
    c.name = Basin::kNames[j];
    c.reads = AffineForm{j == 3 ? std::vector<double>{0, 1} : std::vector<double>{1, 0}, {0.0}, 0.0};
    c.sd = kSd[j];
    c.bias_sd = kBiasSd[j];
    c.hi = kTop[j];
    c.resolution = kResolution[j];
    c.period_s = 1.0;
    model->channels.push_back(std::move(c));
  }
  engine::set_defaults(*model, 60.0);
  return model;
}

}  // namespace steelyard::judges
