// SPDX-License-Identifier: Apache-2.0
// Two real thermometers of a wireless sensor network, one of which meets an introduced event. Source:
// Suthaharan, Alzahrani, Rajasegarar, Leckie & Palaniswami 2010, Labelled data collection for anomaly
// detection in wireless sensor networks, ISSNIP (ODC-BY, contents CC BY 4.0; see data/README.md).
#include <gtest/gtest.h>

#include <cstdio>

#include "outside/csv.h"
#include "outside/machines.h"

namespace steelyard::outside {
namespace {

constexpr engine::TimeNs kPeriod = 5 * kSecond;
constexpr std::size_t kFirstLabelled = 2344 - 1;
constexpr std::size_t kLastLabelled = 2460 - 1;

engine::ChannelModel thermometer(const std::string& name, std::vector<double> weights) {
  engine::ChannelModel c = channel(name, 0.007, std::move(weights));
  c.lo = -40.0;  // the sensor's measuring range
  c.hi = 123.8;
  c.resolution = 0.01;
  c.period_s = 5.0;
  return c;
}

// The motes stand at different places, so their difference is a state that wanders. Every figure is from the
// 2343 readings before the event. The temperature's increments grow like the time up to minutes, so it has a
// trend; greatest likelihood (a Kalman filter, one log unit flat) puts its fading time at 22 s, its unrest at
// 3.5e-4, the gap's unrest at 0.0044 and the noise sds at 0.007 and 0.002: one type of sensor, so 0.007 for
// both. Without a trend the log likelihood is 279 lower. The trend's fading time is the time in which the
// machine can move noticeably, so the response.
engine::Model two_motes() {
  engine::Model model;
  model.states = {state("temperature", 25.0, 5.0, 0.0, {0.0, 1.0, 0.0}),
                  state("trend", 0.0, 0.01, 3.5e-4, {0.0, -1.0 / 20.0, 0.0}),
                  state("gap", 0.0, 1.0, 0.0045, {0.0, 0.0, 0.0})};
  model.channels = {thermometer("mote1", {1.0, 0.0, 0.0}), thermometer("mote2", {1.0, 0.0, -1.0})};
  engine::set_defaults(model, 20.0);
  for (auto& c : model.channels) c.strays = engine::ChannelModel{}.strays;
  return model;
}

struct Tally {
  int readings = 0;
  int mote1_under = 0;
  int mote2_above = 0;
  void add(const engine::Estimate& e) {
    ++readings;
    mote1_under += e.channels[0].trust < 0.5;
    mote2_above += e.channels[1].trust > 0.5;
  }
  [[nodiscard]] double share(int count) const { return static_cast<double>(count) / readings; }
};

TEST(Thermometers, IntroducedEventCostsItsMoteTheTrustAndNotTheOther) {
  const Csv table = Csv::open("wsn_indoor.csv");
  engine::Engine engine = start(two_motes());
  Tally before;
  Tally event;
  Tally after;
  engine::Estimate e;
  for (std::size_t i = 0; i < table.rows(); ++i) {
    const auto mote1 = table.reading(i, "temp1");
    const auto mote2 = table.reading(i, "temp2");
    if (!mote1 || !mote2) continue;
    ASSERT_EQ(table.text(i, "label1") == "1", i >= kFirstLabelled && i <= kLastLabelled);
    const auto t = static_cast<engine::TimeNs>(i) * kPeriod;
    engine.read(t, 0, *mote1, engine::Quality::kGood);
    engine.read(t, 1, *mote2, engine::Quality::kGood);
    engine.estimate(t, engine::Detail::kBrief, e);
    (i < kFirstLabelled ? before : i <= kLastLabelled ? event : after).add(e);
  }
  ASSERT_EQ(event.readings, 117);
  for (const auto& [what, tally] :
       {std::pair{"before the event", before}, {"labelled", event}, {"after", after}})
    std::printf("%s: %d readings, mote 1 under 0.5 in %.1f %%, mote 2 above 0.5 in %.1f %%\n", what,
                tally.readings, 100.0 * tally.share(tally.mote1_under),
                100.0 * tally.share(tally.mote2_above));
  EXPECT_GE(event.share(event.mote1_under), 0.95);
  EXPECT_GE(event.share(event.mote2_above), 0.90);
}

}  // namespace
}  // namespace steelyard::outside
