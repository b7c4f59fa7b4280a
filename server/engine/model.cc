// SPDX-License-Identifier: Apache-2.0
// Bounds of a model, and the defaults in terms of the response time (engine.md §6).
#include "engine/model.h"

#include <cmath>

namespace steelyard::engine {
namespace {

std::string too_many(const char* what, std::size_t count, int bound) {
  return std::string(what) + ": there are " + std::to_string(count) + "; at most " + std::to_string(bound);
}

bool positive(double v) { return std::isfinite(v) && v > 0.0; }

bool fits(const Law& law, const Model& model) {
  const auto* affine = std::get_if<AffineForm>(&law);
  if (!affine) return std::get<std::shared_ptr<Formula>>(law) != nullptr;
  return affine->on_states.size() == model.states.size() && affine->on_inputs.size() == model.inputs.size();
}

std::string state_problem(const StateModel& s, const Model& model) {
  if (!positive(s.start_sd)) return "states." + s.name + ".start_sd: must be greater than 0";
  if (!std::isfinite(s.start)) return "states." + s.name + ".start: must be finite";
  if (!(s.unrest >= 0.0)) return "states." + s.name + ".unrest: must not be negative";
  if (!fits(s.rate, model)) return "states." + s.name + ".rate: does not fit the model";
  return {};
}

std::string channel_problem(const ChannelModel& c, const Model& model) {
  const std::string at = "channels." + c.name;
  if (!fits(c.reads, model)) return at + ".reads: does not fit the model";
  if (!positive(c.sd)) return at + ".sd: must be greater than 0";
  if (!(c.lo < c.hi) || !positive(c.hi - c.lo)) return at + ".range: lower end must be below the upper end";
  if (!(c.bias_sd >= 0.0)) return at + ".bias_sd: must not be negative";
  if (!(c.strays >= 0.0 && c.strays < 1.0)) return at + ".strays: must be from 0 to below 1";
  if (!(c.prior_readings > 2.0)) return at + ".prior_readings: must be greater than 2";
  if (!positive(c.memory_s) || !positive(c.fails_every_s) || !positive(c.recovers_in_s) ||
      !positive(c.changes_in_s) || !positive(c.offset_size))
    return at + ": rates, memory and offset_size must be greater than 0";
  return {};
}

}  // namespace

std::string Model::problem() const {
  if (states.empty()) return "states: there are none; at least 1";
  if (channels.empty()) return "channels: there are none; at least 1";
  if (states.size() > kMaxStates) return too_many("states", states.size(), kMaxStates);
  if (inputs.size() > kMaxInputs) return too_many("inputs", inputs.size(), kMaxInputs);
  if (channels.size() > kMaxChannels) return too_many("channels", channels.size(), kMaxChannels);
  if (!positive(response_s)) return "response: must be greater than 0";
  if (options.max_hypotheses < 1 || options.parents < 0) return "options: max_hypotheses must be at least 1";
  for (const auto& s : states)
    if (auto why = state_problem(s, *this); !why.empty()) return why;
  for (const auto& c : channels)
    if (auto why = channel_problem(c, *this); !why.empty()) return why;
  for (const auto& u : inputs)
    if (!(u.lo <= u.hi) || !(u.sd >= 0.0)) return "inputs." + u.name + ": range or sd is wrong";
  return {};
}

void set_defaults(ChannelModel& channel, double response_s) {
  channel.recovers_in_s = 1000.0 * response_s;
  channel.changes_in_s = 10.0 * response_s;
  channel.memory_s = 5.0 * response_s;
  channel.offset_size = 0.1 * (channel.hi - channel.lo);
}

void set_defaults(Model& model, double response_s) {
  model.response_s = response_s;
  model.jolt = {true, 20.0 * response_s, 1.5 * response_s, 4.5};
  model.still = {true, 20.0 * response_s, 10.0 * response_s, 0.1};
  for (auto& channel : model.channels) set_defaults(channel, response_s);
}

}  // namespace steelyard::engine
