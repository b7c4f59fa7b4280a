// SPDX-License-Identifier: Apache-2.0
#include "judges/prior.h"

#include <algorithm>
#include <cmath>

namespace steelyard::judges {
namespace {

using engine::Condition;
using engine::Mode;

// In datasheet sd per √R, by Condition; a creeping channel's rate at first in sd per R, and its walk in that
// per √R.
constexpr std::array<double, engine::kConditions> kWalk{0.0, 0.02, 3.5, 30.0, 0.05, 0.0};
constexpr double kFirstRate = 1.0;
constexpr double kRateWalk = 0.03;
constexpr double kWalkShape = 1.0;  // of the Gamma of a walk's precision, mean 1
constexpr double kFrozenRepeats = 0.98;

constexpr std::array<double, 4> kSd{0.01, 0.03, 0.05, 0.05};
constexpr double kPositionRange = 1000.0;
constexpr double kSpeedRange = 50.0;
constexpr double kOffsetSizePosition = 2.0;
constexpr double kOffsetSizeSpeed = 1.0;
constexpr double kFailsEveryResponses = 200.0;

bool is_walk(Condition c) {
  return c == Condition::kCreeping || c == Condition::kOffset || c == Condition::kWandering;
}

bool learns_speed(Condition c) { return c == Condition::kOffset || c == Condition::kWandering; }

}  // namespace

std::shared_ptr<engine::Model> prior_model() {
  using engine::AffineForm;
  auto model = std::make_shared<engine::Model>();
  model->states = {{"position", "m", 0.0, 1.0, 0.0, {}, AffineForm{{0, 1}, {}, 0}},
                   {"speed", "m/s", 0.0, 1.0, 0.22, {}, AffineForm{{0, 0}, {}, 0}}};
  for (std::size_t j = 0; j < kSd.size(); ++j) {
    const bool speed = j == 3;
    engine::ChannelModel c;
    c.name = std::string(1, static_cast<char>('a' + j));
    c.reads = AffineForm{speed ? std::vector<double>{0, 1} : std::vector<double>{1, 0}, {}, 0};
    c.sd = kSd[j];
    c.hi = speed ? kSpeedRange : kPositionRange;
    c.lo = -c.hi;
    c.resolution = 1e-4;
    model->channels.push_back(std::move(c));
  }
  engine::set_defaults(*model, 1.0);
  model->freeze_share = 0.0;
  for (std::size_t j = 0; j < kSd.size(); ++j) {
    model->channels[j].offset_size = j == 3 ? kOffsetSizeSpeed : kOffsetSizePosition;
    model->channels[j].fails_every_s = kFailsEveryResponses * model->response_s;
  }
  return model;
}

PriorMachine::PriorMachine(const engine::Model& model, std::uint64_t seed)
    : model_(model), random_(seed), channels_(model.channels.size()) {
  for (std::size_t i = 0; i < state_.size(); ++i)
    state_[i] = model.states[i].start + model.states[i].start_sd * random_.normal();
  for (std::size_t j = 0; j < channels_.size(); ++j)
    channels_[j].noise_sd = draw_noise_sd(static_cast<int>(j));
}

double PriorMachine::spec_sd(int j) const {
  const auto& c = model_.channels[static_cast<std::size_t>(j)];
  return std::sqrt(c.sd * c.sd + c.resolution * c.resolution / 12.0);
}

// κ ~ Gamma(a0, a0) given κ ≤ 1: no sensor is better than its datasheet.
double PriorMachine::draw_noise_sd(int j) {
  const double a0 = 0.5 * model_.channels[static_cast<std::size_t>(j)].prior_readings;
  double kappa = 1.0;
  for (int i = 0; i < 1000; ++i) {
    kappa = random_.gamma(a0) / a0;
    if (kappa <= 1.0) break;
  }
  return spec_sd(j) / std::sqrt(std::min(kappa, 1.0));
}

// Usual ↔ still ↔ resting, usual ↔ jolted, still and resting → jolted, by competing risks over the step.
void PriorMachine::switch_mode(double dt_s) {
  const double to_jolted = mode_ == Mode::kJolted ? 0.0 : 1.0 / model_.jolt.every_s;
  double calmer = 0.0;
  double livelier = 0.0;
  if (mode_ == Mode::kUsual || mode_ == Mode::kStill) calmer = 1.0 / model_.still.every_s;
  if (mode_ == Mode::kStill || mode_ == Mode::kResting) livelier = 1.0 / model_.still.last_s;
  if (mode_ == Mode::kJolted) calmer = 1.0 / model_.jolt.last_s;
  const double total = to_jolted + calmer + livelier;
  if (!random_.chance(-std::expm1(-total * dt_s))) return;
  if (random_.chance(to_jolted / total)) {
    mode_ = Mode::kJolted;
  } else {
    const int step = random_.chance(calmer / (calmer + livelier)) ? -1 : 1;
    mode_ = static_cast<Mode>(static_cast<int>(mode_) + step);
  }
}

// Constant speed under white acceleration, exactly: its integrals over dt by their joint covariance.
void PriorMachine::move(double dt_s) {
  const double times = mode_ == Mode::kJolted    ? model_.jolt.times
                       : mode_ == Mode::kUsual   ? 1.0
                       : mode_ == Mode::kResting ? model_.still.times * model_.still.times
                                                 : model_.still.times;
  const double q = model_.states[1].unrest * times;
  const double n1 = random_.normal();
  const double n2 = random_.normal();
  const double root = std::sqrt(dt_s);
  state_[0] += dt_s * state_[1] + q * dt_s * root * (0.5 * n1 + n2 / std::sqrt(12.0));
  state_[1] += q * root * n1;
}

double PriorMachine::rate(Condition from, Condition to, int j) const {
  const auto& c = model_.channels[static_cast<std::size_t>(j)];
  if (from == to && from != Condition::kStuck) return 0.0;
  if (from == Condition::kSound) return 1.0 / (3.0 * c.fails_every_s);
  if (to == Condition::kSound) return 1.0 / c.recovers_in_s;
  const bool was_dead = from == Condition::kStuck || from == Condition::kFrozen;
  return (was_dead && is_walk(to) ? 0.5 : 1.0) / c.changes_in_s;
}

void PriorMachine::switch_condition(int j, double dt_s) {
  const Condition from = channels_[static_cast<std::size_t>(j)].condition;
  double total = 0.0;
  for (int k = 0; k < engine::kConditions; ++k) total += rate(from, static_cast<Condition>(k), j);
  if (!random_.chance(-std::expm1(-total * dt_s))) return;
  double pick = random_.uniform() * total;
  for (int k = 0; k < engine::kConditions; ++k) {
    pick -= rate(from, static_cast<Condition>(k), j);
    if (pick < 0.0) return begin(j, static_cast<Condition>(k));
  }
}

void PriorMachine::begin(int j, Condition next) {
  const auto u = static_cast<std::size_t>(j);
  const auto& c = model_.channels[u];
  ChannelTruth& channel = channels_[u];
  const Condition from = channel.condition;
  channel.condition = next;
  if (is_walk(next) && !is_walk(from)) channel.own = c.offset_size * random_.normal();
  channel.haste = learns_speed(next) ? random_.gamma(kWalkShape) / kWalkShape : 1.0;
  if (next == Condition::kCreeping)
    channel.rate = kFirstRate * spec_sd(j) / model_.response_s * random_.normal();
  if (next == Condition::kStuck) channel.own = random_.between(c.lo, c.hi);
  if (!is_walk(next)) channel.noise_sd = draw_noise_sd(j);
}

void PriorMachine::walk(int j, double dt_s) {
  ChannelTruth& channel = channels_[static_cast<std::size_t>(j)];
  const double sd = spec_sd(j);
  const double response = model_.response_s;
  if (channel.condition == Condition::kCreeping) {
    const double density = kRateWalk * sd / response / std::sqrt(response);
    const double n1 = random_.normal();
    const double n2 = random_.normal();
    channel.own += dt_s * channel.rate + density * dt_s * std::sqrt(dt_s) * (0.5 * n1 + n2 / std::sqrt(12.0));
    channel.rate += density * std::sqrt(dt_s) * n1;
  }
  const double step =
      kWalk[static_cast<std::size_t>(channel.condition)] * sd * std::sqrt(dt_s / response / channel.haste);
  channel.own += step * random_.normal();
}

void PriorMachine::read(int j, bool first) {
  const auto u = static_cast<std::size_t>(j);
  const auto& c = model_.channels[u];
  ChannelTruth& channel = channels_[u];
  if (channel.condition == Condition::kFrozen && !first) {
    if (!random_.chance(kFrozenRepeats)) channel.shown = random_.between(c.lo, c.hi);
  } else if (random_.chance(c.strays)) {
    channel.shown = random_.between(c.lo, c.hi);
  } else {
    const double true_value = state_[j == 3 ? 1 : 0];
    const double noise = channel.noise_sd * random_.normal();
    channel.shown = channel.condition == Condition::kStuck ? channel.own + noise
                    : is_walk(channel.condition)           ? true_value + channel.own + noise
                                                           : true_value + noise;
  }
  channel.shown = std::clamp(std::round(channel.shown / c.resolution) * c.resolution, c.lo, c.hi);
}

void PriorMachine::step(double dt_s) {
  const bool first = !(dt_s > 0.0);
  if (!first) {
    switch_mode(dt_s);
    move(dt_s);
  }
  for (int j = 0; j < static_cast<int>(channels_.size()); ++j) {
    if (!first) {
      walk(j, dt_s);
      switch_condition(j, dt_s);
    }
    read(j, first);
  }
}

}  // namespace steelyard::judges
