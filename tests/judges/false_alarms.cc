// SPDX-License-Identifier: Apache-2.0
// Fault-free running with set-point changes and jolts: how often does a healthy channel lose trust?
//   false_alarms [--hours H] [--seed S] [--machine 0|1|2]     0: both, 1: the axis, 2: the basin
// Exit 1 where a channel is under trust 0.5 for more than 0.02 % of the time.
#include <algorithm>
#include <chrono>
#include <cmath>
#include <cstdio>
#include <string>
#include <vector>

#include "engine/engine.h"
#include "judges/axis.h"
#include "judges/basin.h"
#include "judges/judge.h"

namespace steelyard::judges {
namespace {

constexpr double kMostUnder = 2e-4;
constexpr double kLostTrust = 0.5;

struct Channel {
  std::string name;
  long moments = 0;
  long under = 0;
  long entries = 0;
  double lowest = 1.0;
  double sum = 0.0;
  bool was_under = false;

  void add(double trust) {
    const bool is_under = trust < kLostTrust;
    ++moments;
    under += is_under;
    entries += is_under && !was_under;
    was_under = is_under;
    lowest = std::min(lowest, trust);
    sum += trust;
  }
  [[nodiscard]] double share_under() const {
    return static_cast<double>(under) / static_cast<double>(moments);
  }
};

/// Coverage tells whether the machine fits its rig at all: a wrong rig would make every alarm a true one.
struct Tally {
  std::vector<Channel> channels;
  std::vector<long> covered;
  long moments = 0;

  Tally(const engine::Model& model) : covered(model.states.size()) {
    for (const auto& c : model.channels) channels.push_back({.name = c.name});
  }
  void add(const engine::Estimate& e, std::initializer_list<double> truth) {
    ++moments;
    for (std::size_t j = 0; j < channels.size(); ++j) channels[j].add(e.channels[j].trust);
    std::size_t i = 0;
    for (const double x : truth) {
      covered[i] += std::fabs(e.states[i].mean - x) < 1.96 * e.states[i].sd;
      ++i;
    }
  }
};

void print(const char* machine, double hours, const engine::Model& model, const Tally& tally,
           Bounds& bounds) {
  std::printf("%s, %g h; 95 %% intervals cover", machine, hours);
  for (std::size_t i = 0; i < model.states.size(); ++i)
    std::printf(" %s %.4f", model.states[i].name.c_str(),
                static_cast<double>(tally.covered[i]) / static_cast<double>(tally.moments));
  std::printf("\n  %-8s %12s %12s %8s %8s\n", "channel", "under 0.5", "entries/day", "lowest", "mean");
  for (const auto& c : tally.channels) {
    std::printf("  %-8s %11.5f%% %12.1f %8.3f %8.4f\n", c.name.c_str(), 100.0 * c.share_under(),
                static_cast<double>(c.entries) * 24.0 / hours, c.lowest,
                c.sum / static_cast<double>(c.moments));
    bounds.require(c.share_under() <= kMostUnder,
                   format("%s, channel %s: under trust 0.5 for %.4f %% of the time; at most %.2f %%", machine,
                          c.name.c_str(), 100.0 * c.share_under(), 100.0 * kMostUnder));
  }
  std::fflush(stdout);
}

constexpr engine::TimeNs kBegin = 1'000'000'000;

void judge_axis(double hours, std::uint64_t seed, Bounds& bounds) {
  const auto model = axis_model();
  Axis axis(seed, true);
  engine::Engine engine(model);
  engine::Estimate e;
  Tally tally(*model);
  const long steps = std::lround(hours * 3600.0 / Axis::kStepS);
  for (long i = 0; i < steps; ++i) {
    axis.step();
    const engine::TimeNs t = kBegin + i * Axis::kStepNs;
    for (int j = 0; j < Axis::kChannels; ++j) engine.read(t, j, axis.reading(j), engine::Quality::kGood);
    engine.estimate(t, engine::Detail::kBrief, e);
    tally.add(e, {axis.position(), axis.speed()});
  }
  print("axis", hours, *model, tally, bounds);
}

void judge_basin(double hours, std::uint64_t seed, Bounds& bounds) {
  const auto model = basin_model();
  Basin basin(seed);
  engine::Engine engine(model);
  engine::Estimate e;
  Tally tally(*model);
  const long steps = std::lround(hours * 3600.0);
  for (long i = 0; i < steps; ++i) {
    basin.step();
    const engine::TimeNs t = kBegin + i * Basin::kStepNs;
    engine.set_input(t, 0, basin.pump_m3s(), true);
    for (int j = 0; j < Basin::kChannels; ++j) engine.read(t, j, basin.reading(j), engine::Quality::kGood);
    engine.estimate(t, engine::Detail::kBrief, e);
    tally.add(e, {basin.level_m(), basin.inflow_m3s()});
  }
  print("basin", hours, *model, tally, bounds);
}

}  // namespace
}  // namespace steelyard::judges

int main(int argc, char** argv) {
  using namespace steelyard::judges;
  const Numbers options(argc, argv, {{"hours", 1.0}, {"seed", 1.0}, {"machine", 0.0}});
  Bounds bounds(false);
  const auto seed = static_cast<std::uint64_t>(options.whole("seed"));
  std::printf("seed %d\n", options.whole("seed"));
  if (options.whole("machine") != 2) judge_axis(options["hours"], seed, bounds);
  if (options.whole("machine") != 1) judge_basin(options["hours"], seed, bounds);
  return bounds.exit_code();
}
