// SPDX-License-Identifier: Apache-2.0
// Bounds of a model, and the defaults in terms of the response time (engine.md §6).
#include "engine/model.h"

#include <cmath>

#include "engine/vector_reading.h"

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

std::string part_problem(const PartModel& p, const std::string& at, const Model& model) {
  if (!fits(p.reads, model)) return at + ".reads: does not fit the model";
  if (!positive(p.sd)) return at + ".sd: must be greater than 0";
  if (!(p.lo < p.hi) || !positive(p.hi - p.lo)) return at + ".range: lower end must be below the upper end";
  if (!(p.bias_sd >= 0.0)) return at + ".bias_sd: must not be negative";
  if (!positive(p.offset_size)) return at + ".offset_size: must be greater than 0";
  return {};
}

std::string vector_problem(const ChannelModel& c, const std::string& at) {
  const auto d = static_cast<std::size_t>(c.parts());
  if (c.modulo > 0.0 || c.cutoff || c.correlation > 0.0 || c.on_change || c.live_zero)
    return at + ": modulo, cutoff, correlation in time, on_change and live zero are for scalar channels";
  if (!c.part_correlation.empty() && c.part_correlation.size() != d * (d - 1) / 2)
    return at + ".part_correlation: must have a number for each pair of parts";
  if (part_correlations(c).llt().info() != Eigen::Success)
    return at + ".part_correlation: must make a positive definite matrix";
  return {};
}

std::string channel_problem(const ChannelModel& c, const Model& model) {
  const std::string at = "channels." + c.name;
  for (int i = 0; i < c.parts(); ++i)
    if (auto why = part_problem(c.part(i), at, model); !why.empty()) return why;
  if (!(c.strays >= 0.0 && c.strays < 1.0)) return at + ".strays: must be from 0 to below 1";
  if (!(c.prior_readings > 2.0)) return at + ".prior_readings: must be greater than 2";
  if (!positive(c.memory_s) || !positive(c.fails_every_s) || !positive(c.recovers_in_s) ||
      !positive(c.changes_in_s))
    return at + ": rates and memory must be greater than 0";
  if (!(c.time_sd_s >= 0.0)) return at + ".time_sd: must not be negative";
  if (!(c.correlation >= 0.0 && c.correlation < 1.0)) return at + ".correlation: must be from 0 to below 1";
  if (c.correlation > 0.0 && !(c.period_s > 0.0)) return at + ".correlation: needs a period";
  if (c.on_change && !positive(c.on_change->deadband)) return at + ".on_change: deadband must be over 0";
  return c.parts() > 1 ? vector_problem(c, at) : std::string();
}

std::string common_problem(const CommonCause& group, std::size_t channels) {
  if (group.channels.size() < 2) return "common: a group must have at least 2 channels";
  if (!(group.share >= 0.0 && group.share <= 1.0)) return "common: a share must be from 0 to 1";
  for (const int j : group.channels)
    if (j < 0 || static_cast<std::size_t>(j) >= channels) return "common: there is no such channel";
  return {};
}

}  // namespace

double law_value(const Law& law, std::span<const double> states, std::span<const double> inputs,
                 double time_s) {
  const auto* affine = std::get_if<AffineForm>(&law);
  if (!affine) return std::get<std::shared_ptr<Formula>>(law)->evaluate(states, inputs, time_s);
  double sum = affine->constant;
  for (std::size_t i = 0; i < states.size(); ++i) sum += affine->on_states[i] * states[i];
  for (std::size_t i = 0; i < inputs.size(); ++i) sum += affine->on_inputs[i] * inputs[i];
  return sum;
}

double correlation_over(const ChannelModel& channel, double gap_s) {
  return channel.correlation > 0.0 ? std::pow(channel.correlation, gap_s / channel.period_s) : 0.0;
}

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
  std::size_t parts = 0;
  for (const auto& c : channels) parts += static_cast<std::size_t>(c.parts());
  if (parts > kMaxParts) return too_many("parts of channels", parts, kMaxParts);
  if (common.size() > kMaxCommon) return too_many("common", common.size(), kMaxCommon);
  for (const auto& group : common)
    if (auto why = common_problem(group, channels.size()); !why.empty()) return why;
  if (!(freeze_share >= 0.0 && freeze_share <= 1.0)) return "freeze_share: must be from 0 to 1";
  for (const auto& u : inputs)
    if (!(u.lo <= u.hi) || !(u.sd >= 0.0)) return "inputs." + u.name + ": range or sd is wrong";
  return {};
}

void set_defaults(ChannelModel& channel, double response_s) {
  channel.recovers_in_s = 1000.0 * response_s;
  channel.changes_in_s = 10.0 * response_s;
  channel.memory_s = 5.0 * response_s;
  channel.offset_size = 0.1 * (channel.hi - channel.lo);
  for (auto& part : channel.others) part.offset_size = 0.1 * (part.hi - part.lo);
}

void set_defaults(Model& model, double response_s) {
  model.response_s = response_s;
  model.jolt = {true, 20.0 * response_s, 1.5 * response_s, 4.5};
  model.still = {true, 20.0 * response_s, 10.0 * response_s, 0.15};
  for (auto& channel : model.channels) set_defaults(channel, response_s);
}

}  // namespace steelyard::engine
