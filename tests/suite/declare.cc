// SPDX-License-Identifier: Apache-2.0
#include "suite/declare.h"

#include <cmath>

namespace steelyard::suite {
namespace {

constexpr double kCommonShare = 0.5;

void fill(engine::PartModel& out, const Channel& c) {
  out.sd = c.sd;
  out.lo = c.lo;
  out.hi = c.hi;
  out.resolution = c.resolution;
}

void fill(engine::ChannelModel& out, const Channel& c, const Machine& machine) {
  out.name = c.name;
  out.modulo = c.modulo;
  if (machine.declares_period) out.period_s = c.period_s;
  fill(out, c);
  for (auto& part : out.others) fill(part, c);
}

// What a row adds to a channel's entry in the rig.
void add_declared(engine::ChannelModel& out, const Channel& c, std::size_t j, const Row& row,
                  const Settings& settings) {
  const Declaration& d = row.declared;
  const double factor = d.sd_factors.empty() ? 1.0 : d.sd_factors[j];
  out.sd *= factor;
  for (auto& part : out.others) part.sd *= factor;
  out.fails_every_s = 3600.0 * (d.fails_every_h > 0.0 ? d.fails_every_h : settings.fails_every_h);
  if (d.on_change && c.deadband > 0.0) out.on_change = engine::OnChange{c.deadband, 0.0};
  if (d.time_sd) out.time_sd_s = c.time_jitter_s;
  if (d.correlation && c.damping_s > 0.0) {
    out.correlation = std::exp(-c.period_s / c.damping_s);
    out.period_s = c.period_s;
  }
}

}  // namespace

std::vector<int> numbers(const Machine& machine, const Row& row) {
  std::vector<int> out;
  int count = 0;
  for (int j = 0; j < static_cast<int>(machine.channels.size()); ++j)
    out.push_back(row.has(j) ? count++ : -1);
  return out;
}

std::shared_ptr<engine::Model> declare(const Machine& machine, const Row& row, const Settings& settings) {
  auto model = std::make_shared<engine::Model>(machine.engine_model());
  const auto channels = channels_of(machine, row);
  for (std::size_t j = 0; j < channels.size(); ++j) fill(model->channels[j], channels[j], machine);
  for (auto& s : model->states) s.unrest *= row.declared.unrest_factor;
  engine::set_defaults(*model, machine.response_s * row.declared.response_factor);
  std::vector<engine::ChannelModel> present;
  for (std::size_t j = 0; j < channels.size(); ++j) {
    add_declared(model->channels[j], channels[j], j, row, settings);
    if (row.has(static_cast<int>(j))) present.push_back(model->channels[j]);
  }
  model->channels = std::move(present);
  // Rows with a common cause have all channels.
  if (!row.declared.common.empty()) model->common.push_back({row.declared.common, kCommonShare});
  model->options.max_hypotheses *= settings.budget_factor;
  model->options.parents *= settings.parents_factor;
  return model;
}

}  // namespace steelyard::suite
