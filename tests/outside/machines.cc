// SPDX-License-Identifier: Apache-2.0
#include "outside/machines.h"

#include <gtest/gtest.h>

namespace steelyard::outside {

engine::Model kalman_model() {
  engine::Model model;
  model.jolt.on = false;
  model.still.on = false;
  model.options.learn_precision = false;
  model.options.cap_precision = false;
  model.options.forget = false;
  model.options.use_repeats = false;
  model.options.conditions = {true, false, false, false, false, false};
  return model;
}

engine::StateModel state(const std::string& name, double start, double start_sd, double unrest,
                         std::vector<double> rate) {
  engine::StateModel s;
  s.name = name;
  s.start = start;
  s.start_sd = start_sd;
  s.unrest = unrest;
  s.rate = engine::AffineForm{std::move(rate), {}, 0.0};
  return s;
}

engine::ChannelModel channel(const std::string& name, double sd, std::vector<double> weights) {
  engine::ChannelModel c;
  c.name = name;
  c.reads = engine::AffineForm{std::move(weights), {}, 0.0};
  c.sd = sd;
  c.lo = -1e9;
  c.hi = 1e9;
  c.strays = 0.0;
  return c;
}

engine::Engine start(engine::Model model) {
  return engine::Engine(std::make_shared<const engine::Model>(std::move(model)));
}

engine::Estimate estimate(engine::Engine& engine, engine::TimeNs t, engine::Detail detail) {
  engine::Estimate out;
  engine.estimate(t, detail, out);
  return out;
}

void read(engine::Engine& engine, engine::TimeNs t, int channel, double value) {
  ASSERT_EQ(engine.read(t, channel, value, engine::Quality::kGood), engine::Fate::kFused)
      << "channel " << channel << " at " << t << " ns, value " << value;
}

}  // namespace steelyard::outside
