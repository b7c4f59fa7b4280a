// SPDX-License-Identifier: Apache-2.0
#include "rig/common.h"

#include <algorithm>
#include <array>
#include <string>
#include <string_view>
#include <vector>

#include "rig/nearest.h"
#include "rig/number.h"

namespace steelyard::rig {
namespace {

constexpr std::array<std::string_view, 2> kKeys{"channels", "share"};
constexpr auto kMostGroups = static_cast<std::size_t>(engine::kMaxCommon);

using Names = std::vector<std::string_view>;

// Adds the channel that `item` names, if it is one and new to the group.
void read_member(const Item& item, const Names& names, std::vector<int>& members, Problems& problems) {
  const std::string& name = item.node->text;
  if (!item.node->is_scalar()) return report_rule(item, "the name of a channel", problems);
  const auto found = std::find(names.begin(), names.end(), name);
  if (found == names.end()) {
    return problems.add(item.place(), item.path,
                        shown(name) + " is not a channel" + did_you_mean(name, names));
  }
  const auto index = static_cast<int>(found - names.begin());
  if (std::find(members.begin(), members.end(), index) != members.end()) {
    return problems.add(item.place(), item.path, shown(name) + " is listed twice");
  }
  members.push_back(index);
}

std::vector<int> read_members(const Item& item, const Names& names, Problems& problems) {
  std::vector<int> members;
  if (!item.node->is_list() || item.node->items.size() < 2) {
    report_rule(item, "a list of at least two channels", problems);
    return members;
  }
  for (const Node& member : item.node->items) {
    if (problems.full()) break;
    read_member({&member, item.path}, names, members, problems);
  }
  return members;
}

// Of a channel's faults no more than all can strike groups.
void check_shares(const Item& item, const engine::Model& model, Problems& problems) {
  std::vector<double> shares(model.channels.size(), 0.0);
  for (const engine::CommonCause& cause : model.common) {
    for (const int channel : cause.channels) shares[static_cast<std::size_t>(channel)] += cause.share;
  }
  for (std::size_t i = 0; i < shares.size(); ++i) {
    if (shares[i] <= 1.0 + 1e-12) continue;
    problems.add(item.place(), item.path,
                 "gives " + model.channels[i].name + " shares that add up to " + number_text(shares[i]) +
                     "; must be at most 1");
  }
}

}  // namespace

void read_common(const Item& item, engine::Model& model, Context& context) {
  Problems& problems = context.problems;
  if (!item.node->is_list()) return report_rule(item, "a list of groups {channels, share}", problems);
  const std::vector<Node>& groups = item.node->items;
  if (groups.size() > kMostGroups) {
    problems.add(item.place(), item.path,
                 "has " + std::to_string(groups.size()) + " groups; at most " + std::to_string(kMostGroups) +
                     " are possible");
  }
  Names names;
  for (const engine::ChannelModel& channel : model.channels) names.push_back(channel.name);
  for (std::size_t i = 0; i < groups.size() && i < kMostGroups && !problems.full(); ++i) {
    const Item group{&groups[i], item.path + "[" + std::to_string(i + 1) + "]"};
    const Fields fields(group, kKeys, problems);
    engine::CommonCause cause;
    if (const auto members = fields.required("channels")) {
      cause.channels = read_members(*members, names, problems);
    }
    if (const auto share = fields.required("share")) {
      cause.share = read_number(*share, between(0, 1), problems).value_or(cause.share);
    }
    model.common.push_back(std::move(cause));
  }
  check_shares(item, model, problems);
}

}  // namespace steelyard::rig
