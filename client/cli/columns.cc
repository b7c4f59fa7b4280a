// SPDX-License-Identifier: Apache-2.0
// Rows of results. Names need no quoting: they are [a-z][a-z0-9_]*.
#include "cli/columns.h"

#include <algorithm>
#include <initializer_list>

#include "timeline/kinds.h"

namespace steelyard::client {
namespace {

void append_cells(std::string& out, std::initializer_list<double> values) {
  for (const double value : values) {
    out += ',';
    append_number(out, value);
  }
}

// All behind time and channel.
void append_part_row(std::string& out, const engine::ChannelEstimate& channel,
                     const engine::PartEstimate& part) {
  append_cells(out, {channel.trust});
  for (const double probability : channel.probability) append_cells(out, {probability});
  append_cells(out, {channel.silent, part.noise_sd, part.noise_sd90.lo, part.noise_sd90.hi, part.offset,
                     part.offset_sd, channel.influence});
  out += ',';
  if (channel.age_s >= 0.0) append_number(out, channel.age_s);  // empty: no reading yet
  out += ",";
  out += timeline::ne107_status(channel);
  out += '\n';
}

}  // namespace

void append_estimate_header(std::string& out, const Names& names) {
  out += "time";
  for (const std::string& state : names.states) out += "," + state + "," + state + ".sd";
  for (const std::string& channel : names.channels) out += ",trust." + channel;
  out += '\n';
}

void append_estimate_row(std::string& out, const engine::Estimate& estimate, TimeStyle style) {
  out += time_text(estimate.time_ns, style);
  for (const engine::StateEstimate& state : estimate.states) append_cells(out, {state.mean, state.sd});
  for (const engine::ChannelEstimate& channel : estimate.channels) append_cells(out, {channel.trust});
  out += '\n';
}

void append_channel_header(std::string& out) {
  out +=
      "time,channel,trust,p.sound,p.creeping,p.offset,p.wandering,p.stuck,p.frozen,p.silent,noise_sd,noise_"
      "sd.lo,"
      "noise_sd.hi,offset,offset.sd,influence,age,status\n";
}

void append_channel_rows(std::string& out, const Names& names, const engine::Estimate& estimate,
                         TimeStyle style) {
  const std::string time = time_text(estimate.time_ns, style);
  const std::size_t count = std::min(names.channels.size(), estimate.channels.size());
  for (std::size_t i = 0; i < count; ++i) {
    const engine::ChannelEstimate& channel = estimate.channels[i];
    const engine::PartEstimate first{channel.noise_sd, channel.noise_sd90, channel.offset, channel.offset_sd};
    for (std::size_t part = 0; part <= channel.others.size(); ++part) {
      out += time + "," + names.channels[i];
      if (!channel.others.empty()) out += "." + std::to_string(part + 1);
      append_part_row(out, channel, part == 0 ? first : channel.others[part - 1]);
    }
  }
}

}  // namespace steelyard::client
