// SPDX-License-Identifier: Apache-2.0
// The rows that replay and watch write (design.md §5).
#pragma once

#include <string>
#include <vector>

#include "engine/estimate.h"
#include "lib/log/text.h"

namespace steelyard::client {

struct Names {
  std::vector<std::string> states;
  std::vector<std::string> channels;
  std::vector<std::string> units;  ///< of the channels
  bool operator==(const Names&) const = default;
};

/// time,<state>,<state>.sd,…,trust.<channel>,…
void append_estimate_header(std::string& out, const Names& names);
void append_estimate_row(std::string& out, const engine::Estimate& estimate, TimeStyle style);

/// time,channel,trust,p.sound,…: one row a channel; of a vector channel one a part, named <channel>.1 and so
/// on, which share all but noise and offset.
void append_channel_header(std::string& out);
void append_channel_rows(std::string& out, const Names& names, const engine::Estimate& estimate,
                         TimeStyle style);

}  // namespace steelyard::client
