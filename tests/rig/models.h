// SPDX-License-Identifier: Apache-2.0
// Whether two models say the same.
#pragma once

#include <gtest/gtest.h>

#include <memory>
#include <variant>
#include <vector>

#include "engine/model.h"

namespace steelyard::rig {

inline double value_of(const engine::Law& law, const std::vector<double>& states,
                       const std::vector<double>& inputs) {
  if (const auto* formula = std::get_if<std::shared_ptr<engine::Formula>>(&law)) {
    return (*formula)->evaluate(states, inputs, 1.7e9);
  }
  const auto& form = std::get<engine::AffineForm>(law);
  double sum = form.constant;
  for (std::size_t i = 0; i < states.size(); ++i) sum += form.on_states[i] * states[i];
  for (std::size_t i = 0; i < inputs.size(); ++i) sum += form.on_inputs[i] * inputs[i];
  return sum;
}

inline void expect_equal(const engine::Law& a, const engine::Law& b, const engine::Model& model) {
  ASSERT_EQ(a.index(), b.index());
  for (const double scale : {0.0, 0.3, 1.0, 7.0}) {
    std::vector<double> states;
    std::vector<double> inputs;
    for (std::size_t i = 0; i < model.states.size(); ++i) {
      states.push_back(scale * (1.0 + static_cast<double>(i)));
    }
    for (std::size_t i = 0; i < model.inputs.size(); ++i) {
      inputs.push_back(scale * (2.0 - static_cast<double>(i)));
    }
    EXPECT_EQ(value_of(a, states, inputs), value_of(b, states, inputs));
  }
}

inline void expect_equal(const engine::StateModel& a, const engine::StateModel& b,
                         const engine::Model& model) {
  EXPECT_EQ(a.name, b.name);
  EXPECT_EQ(a.unit, b.unit);
  EXPECT_EQ(a.start, b.start);
  EXPECT_EQ(a.start_sd, b.start_sd);
  EXPECT_EQ(a.unrest, b.unrest);
  EXPECT_EQ(a.needs, b.needs);
  expect_equal(a.rate, b.rate, model);
}

inline void expect_equal(const engine::InputModel& a, const engine::InputModel& b) {
  EXPECT_EQ(a.name, b.name);
  EXPECT_EQ(a.unit, b.unit);
  EXPECT_EQ(a.start, b.start);
  EXPECT_EQ(a.sd, b.sd);
  EXPECT_EQ(a.period_s, b.period_s);
  EXPECT_EQ(a.lo, b.lo);
  EXPECT_EQ(a.hi, b.hi);
}

inline void expect_equal_part(const engine::PartModel& a, const engine::PartModel& b,
                              const engine::Model& model) {
  EXPECT_EQ(a.unit, b.unit);
  EXPECT_EQ(a.sd, b.sd);
  ASSERT_EQ(a.sd_formula == nullptr, b.sd_formula == nullptr);
  if (a.sd_formula) expect_equal(engine::Law(a.sd_formula), engine::Law(b.sd_formula), model);
  EXPECT_EQ(a.bias_sd, b.bias_sd);
  EXPECT_EQ(a.lo, b.lo);
  EXPECT_EQ(a.hi, b.hi);
  EXPECT_EQ(a.resolution, b.resolution);
  EXPECT_EQ(a.offset_size, b.offset_size);
  expect_equal(a.reads, b.reads, model);
}

inline void expect_equal_rates(const engine::ChannelModel& a, const engine::ChannelModel& b) {
  EXPECT_EQ(a.fails_every_s, b.fails_every_s);
  EXPECT_EQ(a.recovers_in_s, b.recovers_in_s);
  EXPECT_EQ(a.changes_in_s, b.changes_in_s);
  EXPECT_EQ(a.memory_s, b.memory_s);
  EXPECT_EQ(a.strays, b.strays);
  EXPECT_EQ(a.prior_readings, b.prior_readings);
}

inline void expect_equal(const engine::ChannelModel& a, const engine::ChannelModel& b,
                         const engine::Model& model) {
  SCOPED_TRACE(a.name);
  EXPECT_EQ(a.name, b.name);
  ASSERT_EQ(a.parts(), b.parts());
  for (int i = 0; i < a.parts(); ++i) expect_equal_part(a.part(i), b.part(i), model);
  EXPECT_EQ(a.part_correlation, b.part_correlation);
  EXPECT_EQ(a.correlation, b.correlation);
  EXPECT_EQ(a.time_sd_s, b.time_sd_s);
  ASSERT_EQ(a.on_change.has_value(), b.on_change.has_value());
  if (a.on_change) {
    EXPECT_EQ(a.on_change->deadband, b.on_change->deadband);
    EXPECT_EQ(a.on_change->heartbeat_s, b.on_change->heartbeat_s);
  }
  EXPECT_EQ(a.cutoff, b.cutoff);
  EXPECT_EQ(a.modulo, b.modulo);
  EXPECT_EQ(a.period_s, b.period_s);
  EXPECT_EQ(a.delay_s, b.delay_s);
  EXPECT_EQ(a.live_zero, b.live_zero);
  expect_equal_rates(a, b);
}

inline void expect_equal(const engine::ModeModel& a, const engine::ModeModel& b) {
  EXPECT_EQ(a.on, b.on);
  EXPECT_EQ(a.every_s, b.every_s);
  EXPECT_EQ(a.last_s, b.last_s);
  EXPECT_EQ(a.times, b.times);
}

/// Only for models whose states, inputs and channels come in the same order.
inline void expect_equal(const engine::Model& a, const engine::Model& b) {
  ASSERT_EQ(a.states.size(), b.states.size());
  ASSERT_EQ(a.inputs.size(), b.inputs.size());
  ASSERT_EQ(a.channels.size(), b.channels.size());
  EXPECT_EQ(a.response_s, b.response_s);
  expect_equal(a.jolt, b.jolt);
  expect_equal(a.still, b.still);
  for (std::size_t i = 0; i < a.states.size(); ++i) expect_equal(a.states[i], b.states[i], a);
  for (std::size_t i = 0; i < a.inputs.size(); ++i) expect_equal(a.inputs[i], b.inputs[i]);
  for (std::size_t i = 0; i < a.channels.size(); ++i) expect_equal(a.channels[i], b.channels[i], a);
  EXPECT_EQ(a.freeze_share, b.freeze_share);
  ASSERT_EQ(a.common.size(), b.common.size());
  for (std::size_t i = 0; i < a.common.size(); ++i) {
    EXPECT_EQ(a.common[i].channels, b.common[i].channels);
    EXPECT_EQ(a.common[i].share, b.common[i].share);
  }
}

}  // namespace steelyard::rig
