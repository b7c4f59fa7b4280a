// SPDX-License-Identifier: Apache-2.0
#include "suite/machine.h"

#include <algorithm>
#include <stdexcept>

namespace steelyard::suite {

bool Row::hurts(int channel) const {
  return std::any_of(faults.begin(), faults.end(), [&](const Fault& f) { return f.channel == channel; });
}

bool Row::misdeclares(int channel) const {
  const auto j = static_cast<std::size_t>(channel);
  if (!declared.sd_factors.empty() && declared.sd_factors[j] < 1.0) return true;
  return std::any_of(traits.begin(), traits.end(), [&](const Trait& t) {
    if (t.channel != channel) return false;
    // A declared correlation tells of a damping's noise, not of the lag that the damping has as well.
    return (t.field == &Channel::deadband && !declared.on_change) || t.field == &Channel::holds ||
           t.field == &Channel::damping_s || (t.field == &Channel::time_jitter_s && !declared.time_sd);
  });
}

int Machine::first_part(int channel) const {
  int count = 0;
  for (int j = 0; j < channel; ++j) count += channels[static_cast<std::size_t>(j)].parts;
  return count;
}

int Machine::parts() const { return first_part(static_cast<int>(channels.size())); }

const std::vector<Machine>& machines() {
  static const std::vector<Machine> all = [] {
    std::vector<Machine> list;
    list.push_back(make_trolley());
    list.push_back(make_basin());
    list.push_back(make_cart());
    list.push_back(make_plant());
    return list;
  }();
  return all;
}

const Machine& machine(const std::string& name) {
  for (const auto& m : machines())
    if (m.name == name) return m;
  throw std::out_of_range("machine " + name + ": there is none of this name");
}

std::vector<Channel> channels_of(const Machine& machine, const Row& row) {
  std::vector<Channel> channels = machine.channels;
  for (const auto& t : row.traits) channels[static_cast<std::size_t>(t.channel)].*t.field = t.value;
  return channels;
}

}  // namespace steelyard::suite
