// SPDX-License-Identifier: Apache-2.0
// The demo's rig in two situations that are no sensor fault (common practice, no source): a basin that stands
// dry for two days and then fills to the weir, and a pump signal that is lost while the pump runs.
#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>

#include "suite/random.h"
#include "timeline/timeline.h"

namespace steelyard::suite {
namespace {

constexpr double kAreaM2 = 120.0;
constexpr double kStart = 1'757'829'600.0;

constexpr const char* kRig = R"(
rig: basin
response: 60 s
states:
  level:     {unit: m,    start: 1,    start_sd: 1.5}
  inflow:    {unit: m3/s, start: 0.01, start_sd: 0.02}
  shortfall: {unit: m3/s, start: 0,    start_sd: 0.002}
inputs:
  pump: {unit: m3/s, start: 0, sd: 0.003, period: 5 s, range: [0, 0.15]}
motion:
  level: (inflow - pump + shortfall - 1.84 * 4 * max(level - 4.2, 0)^1.5) / 120
  shortfall: -shortfall / 7200
unrest: {level: 0.0002, inflow: 0.002, shortfall: 0.0003}
channels:
  sonic: {reads: level, sd: 0.004 + 0.04 * abs(inflow), bias_sd: 0.01, range: [0, 6], resolution: 0.001,
          period: 1 s, fails_every: 60 d}
  radar: {reads: level, sd: 0.002 + 0.02 * abs(inflow), bias_sd: 0.005, range: [0, 6], resolution: 0.001,
          period: 1 s, fails_every: 180 d}
  cell:  {reads: level, sd: 0.0015 + 0.002 * abs(inflow), bias_sd: 0.015, range: [0.15, 6], resolution: 0.001,
          period: 1 s, fails_every: 180 d}
  meter: {reads: inflow, sd: 0.001 + 0.02 * abs(inflow), bias_sd: 0.001, range: [0, 0.5], resolution: 0.0001,
          cutoff: 0.005, period: 5 s, fails_every: 180 d}
)";

std::shared_ptr<const rig::Rig> basin() {
  const auto loaded = rig::load(kRig, "basin.yaml");
  for (const auto& p : loaded.problems) ADD_FAILURE() << p.text();
  return loaded.rig;
}

/// Water, and four sensors that are as good as their datasheets say.
class Basin {
 public:
  explicit Basin(std::uint64_t seed, double level_m) : level_m_(level_m), random_(seed) {}

  void flow(double inflow_m3s, double pumped_m3s) {
    inflow_m3s_ = inflow_m3s;
    const double over = 1.84 * 4.0 * std::pow(std::max(level_m_ - 4.2, 0.0), 1.5);
    level_m_ = std::max(0.0, level_m_ + (inflow_m3s - pumped_m3s - over) / kAreaM2);
  }
  [[nodiscard]] double level_m() const { return level_m_; }
  double sonic() {
    return millimetres(level_m_ + 0.007 + (0.003 + turbulent() * 0.009) * random_.normal(), 0.0);
  }
  double radar() {
    return millimetres(level_m_ - 0.003 + (0.002 + turbulent() * 0.005) * random_.normal(), 0.0);
  }
  double cell() { return millimetres(level_m_ + 0.011 + 0.0015 * random_.normal(), 0.15); }
  double meter() {
    const double shown = inflow_m3s_ + 0.0004 + (0.001 + 0.015 * inflow_m3s_) * random_.normal();
    return shown < 0.005 ? 0.0 : std::round(shown * 1e4) / 1e4;
  }

 private:
  [[nodiscard]] double turbulent() const { return std::min(1.0, inflow_m3s_ / 0.2); }
  static double millimetres(double level_m, double lowest) {
    return std::max(lowest, std::round(level_m * 1e3) / 1e3);
  }
  double level_m_;
  double inflow_m3s_ = 0.0;
  Random random_;
};

class Replay {
 public:
  Replay() : rig_(basin()), timeline_(rig_), source_(timeline_.source_number("test")) {}

  void add(const char* signal, double t_s, double value) {
    timeline::Reading r;
    r.signal = *rig_->find(signal);
    r.time_ns = std::llround((kStart + t_s) * 1e9);
    r.values = value;
    r.source = source_;
    r.sequence = ++sequence_;
    batch_.push_back(r);
  }
  void add_sensors(Basin& water, double t_s) {
    add("sonic", t_s, water.sonic());
    add("radar", t_s, water.radar());
    add("cell", t_s, water.cell());
    add("meter", t_s, water.meter());
  }
  /// Fuses what was added and notes the trusts.
  void run() {
    timeline_.run(batch_, outcomes_);
    batch_.clear();
    timeline_.estimate(timeline_.clock(), engine::Detail::kBrief, estimate_);
    for (std::size_t j = 0; j < estimate_.channels.size(); ++j)
      if (estimate_.channels[j].trust < lowest_) {
        lowest_ = estimate_.channels[j].trust;
        where_ = rig_->model->channels[j].name + " at " + std::to_string(timeline_.clock() / 1'000'000'000);
      }
  }
  [[nodiscard]] double lowest() const { return lowest_; }
  [[nodiscard]] const std::string& where() const { return where_; }
  [[nodiscard]] double level_m() const { return estimate_.states[0].mean; }

 private:
  std::shared_ptr<const rig::Rig> rig_;
  timeline::Timeline timeline_;
  std::uint32_t source_;
  std::uint64_t sequence_ = 0;
  std::vector<timeline::Reading> batch_;
  std::vector<timeline::Outcome> outcomes_;
  engine::Estimate estimate_;
  double lowest_ = 1.0;
  std::string where_;
};

// Every channel is censored or nearly so for two days: no sign of freezing, and no lesson that must be
// unlearned.
TEST(Basin, DryForTwoDaysThenFullToTheWeirShakesNoTrust) {
  constexpr int kDry = 48 * 3600;
  constexpr int kStep = 5;
  Basin water(1, 0.0);
  Replay replay;
  for (int t = 0; t < kDry + 2 * 3600; t += kStep) {
    const double storm = 0.2 * std::clamp((t - kDry) / 1200.0, 0.0, 1.0);
    for (int s = 0; s < kStep; ++s) water.flow(storm, 0.0);
    replay.add("pump", t, 0.0);
    replay.add_sensors(water, t);
    replay.run();
  }
  EXPECT_GT(water.level_m(), 4.2);
  EXPECT_NEAR(replay.level_m(), water.level_m(), 0.03);
  EXPECT_GE(replay.lowest(), 0.5) << replay.where();
}

TEST(Basin, APumpSignalLostForTenMinutesWhilePumpingShakesNoTrust) {
  Basin water(2, 1.5);
  Replay replay;
  double pump = 0.0;
  for (int t = 0; t < 2 * 3600; ++t) {
    const double wanted = t % 3000 >= 300 && t % 3000 < 2100 ? 0.06 : 0.0;
    pump += std::clamp(wanted - pump, -0.006, 0.006);
    water.flow(0.03, pump);
    const bool lost = t >= 3900 && t < 4500;
    if (!lost) replay.add("pump", t, pump);
    replay.add_sensors(water, t);
    replay.run();
  }
  EXPECT_NEAR(replay.level_m(), water.level_m(), 0.03);
  EXPECT_GE(replay.lowest(), 0.5) << replay.where();
}

}  // namespace
}  // namespace steelyard::suite
