// SPDX-License-Identifier: Apache-2.0
// Which readings a settled estimate has, its limits, and what it gains on live ones.
#include <gtest/gtest.h>

#include <cmath>
#include <cstdio>
#include <ctime>

#include "engine/axis.h"
#include "engine/settled.h"
#include "outside/machines.h"

namespace steelyard::engine {
namespace {

using outside::kalman_model;
using outside::kSecond;
using outside::relative;

struct AxisRun {
  AxisRun() : model(suite::axis_model({}, double_fault())), readings(axis_readings(3)) {}
  /// Steps around the fault's onset, up to and with `last`.
  [[nodiscard]] std::vector<Estimate> settle(const Settling& settling, int last = kLast) const {
    Settled settled(*model, settling);
    for (int i = kFirst; i <= last; ++i) read_moment(settled.engine, readings, i);
    settled.engine.settle_rest();
    early = settled.engine.settled_early();
    return settled.all;
  }
  static constexpr int kFirst = 940;
  static constexpr int kLast = 1060;
  static constexpr TimeNs kStep = 20'000'000;
  std::shared_ptr<Model> model;
  suite::Readings readings;
  mutable std::int64_t early = 0;
};

TEST(Settle, EachMomentHasExactlyTheReadingsOfItsLag) {
  const AxisRun axis;
  const Settling settling = Settled::settling(15 * AxisRun::kStep, Detail::kFull);
  const auto all = axis.settle(settling);
  ASSERT_EQ(all.size(), std::size_t{AxisRun::kLast - AxisRun::kFirst + 1});
  EXPECT_EQ(axis.early, 0);
  for (const int step : {940, 941, 985, 998, 1000, 1001, 1005, 1030, 1045, 1050, 1060}) {
    const auto until = axis.settle(settling, std::min(step + 15, AxisRun::kLast));
    const auto at = static_cast<std::size_t>(step - AxisRun::kFirst);
    EXPECT_EQ(all[at].time_ns, axis_time(step));
    EXPECT_TRUE(same_bits(numbers(all[at]), numbers(until[at]))) << "step " << step;
    const auto fewer = axis.settle(settling, std::min(step + 14, AxisRun::kLast));
    if (step + 15 <= AxisRun::kLast) {
      EXPECT_FALSE(same_bits(numbers(all[at]), numbers(fewer[at]))) << "step " << step;
    }
  }
}

TEST(Settle, AtALimitTheOldestIsSettledEarly) {
  const AxisRun axis;
  Settling settling = Settled::settling(10 * AxisRun::kStep, Detail::kBrief);
  const auto ten = axis.settle(settling);
  settling.lag_ns = kSecond;
  settling.max_slices = 11;
  const auto limited = axis.settle(settling);
  EXPECT_EQ(axis.early, 110);
  ASSERT_EQ(limited.size(), ten.size());
  for (std::size_t i = 0; i < ten.size(); ++i)
    EXPECT_TRUE(same_bits(numbers(limited[i]), numbers(ten[i]))) << "row " << i;
}

TEST(Settle, WithoutRoomWhatIsSettledIsWhatWasFiltered) {
  const AxisRun axis;
  Settling settling = Settled::settling(kSecond, Detail::kBrief);
  settling.max_bytes = 1;
  const auto all = axis.settle(settling);
  EXPECT_EQ(axis.early, AxisRun::kLast - AxisRun::kFirst);  // the last is not early
  Engine live(axis.model);
  for (int i = AxisRun::kFirst; i <= AxisRun::kLast; ++i) {
    read_moment(live, axis.readings, i);
    const auto a = numbers(outside::estimate(live, axis_time(i)));
    const auto b = numbers(all[static_cast<std::size_t>(i - AxisRun::kFirst)]);
    ASSERT_EQ(a.size(), b.size());
    for (std::size_t k = 0; k < a.size(); ++k) ASSERT_NEAR(a[k], b[k], 1e-11 * (1.0 + std::fabs(a[k]))) << k;
  }
}

TEST(Settle, ATenthOfTheComputeBudgetChangesNothing) {
  const AxisRun axis;
  Settling settling = Settled::settling(kSecond, Detail::kBrief);
  const auto usual = axis.settle(settling);
  settling.negligible /= 10.0;
  const auto finer = axis.settle(settling);
  double mean = 0.0;
  double sd = 0.0;
  double trust = 0.0;
  for (std::size_t i = 0; i < usual.size(); ++i) {
    for (std::size_t x = 0; x < 2; ++x) {
      mean = std::max(mean,
                      std::fabs(usual[i].states[x].mean - finer[i].states[x].mean) / finer[i].states[x].sd);
      sd = std::max(sd, relative(usual[i].states[x].sd, finer[i].states[x].sd));
    }
    for (std::size_t j = 0; j < usual[i].channels.size(); ++j)
      trust = std::max(trust, std::fabs(usual[i].channels[j].trust - finer[i].channels[j].trust));
  }
  std::printf("a tenth of the budget: mean %.1e sd, sd %.1e, trust %.1e\n", mean, sd, trust);
  EXPECT_LT(mean, 3e-3);
  EXPECT_LT(sd, 3e-3);
  EXPECT_LT(trust, 1e-3);
}

TEST(Settle, EveryTimeOfReadingHasOneEstimate) {
  Model model = kalman_model();
  model.states = {outside::state("x", 0.0, 1.0, 0.1, {0.0})};
  model.inputs = {{"u", "1", 0.0, 0.1, 0.0, -1.0, 1.0}};
  std::get<AffineForm>(model.states[0].rate).on_inputs = {1.0};
  model.channels = {outside::channel("a", 0.1, {1.0}), outside::channel("b", 0.1, {1.0})};
  for (auto& c : model.channels) std::get<AffineForm>(c.reads).on_inputs = {0.0};
  model.channels[0].lo = -5.0;
  model.channels[0].period_s = 1.0;
  Settled settled(model, kSecond / 2);
  Engine& engine = settled.engine;
  EXPECT_EQ(engine.read(1 * kSecond, 0, 0.1, Quality::kBad), Fate::kNotUsable);
  EXPECT_EQ(engine.read(2 * kSecond, 0, 0.1, Quality::kGood), Fate::kFused);
  EXPECT_EQ(engine.read(2 * kSecond, 1, 0.2, Quality::kGood), Fate::kFused);
  EXPECT_EQ(engine.read(2 * kSecond + 1, 0, 0.1, Quality::kGood), Fate::kSameMeasurement);
  engine.set_input(3 * kSecond, 0, 0.5, true);
  EXPECT_EQ(engine.read(4 * kSecond, 0, -6.0, Quality::kGood), Fate::kOutOfRange);
  engine.set_input(5 * kSecond, 0, 0.5, false);
  EXPECT_EQ(engine.read(6 * kSecond, 1, 0.7, Quality::kGood), Fate::kFused);
  EXPECT_EQ(settled.all.size(), 4U) << "all that is over half a second behind";
  engine.settle_rest();
  const std::vector<TimeNs> times{1 * kSecond, 2 * kSecond, 2 * kSecond + 1, 4 * kSecond, 6 * kSecond};
  ASSERT_EQ(settled.all.size(), times.size());
  for (std::size_t i = 0; i < times.size(); ++i) EXPECT_EQ(settled.all[i].time_ns, times[i]);
}

TEST(Settle, ACopyGoesOnWithoutSettling) {
  const AxisRun axis;
  Settled settled(*axis.model, 0);
  read_moment(settled.engine, axis.readings, 940);
  Engine copy = settled.engine;
  for (int i = 941; i < 950; ++i) read_moment(copy, axis.readings, i);
  copy.settle_rest();
  EXPECT_TRUE(settled.all.empty());
  for (int i = 941; i < 950; ++i) read_moment(settled.engine, axis.readings, i);
  EXPECT_EQ(settled.all.size(), 9U);
  EXPECT_TRUE(same_bits(numbers(outside::estimate(copy, axis_time(949))),
                        numbers(outside::estimate(settled.engine, axis_time(949)))));
}

struct Gain {
  double live = 0.0;  ///< sums of squared errors of the position
  double settled = 0.0;
  double live_covered = 0.0;
  double covered = 0.0;  ///< by mean ± 1.96 sd
  double speed_live = 0.0;
  double speed_settled = 0.0;
  double live_us = 0.0;  ///< a moment
  double settled_us = 0.0;
  int moments = 0;
};

void feed(Engine& engine, const suite::Readings& readings, int step) {
  for (std::size_t j = 0; j < suite::kChannels; ++j) {
    const double y = readings.value[j][static_cast<std::size_t>(step)];
    if (!std::isnan(y)) engine.read(axis_time(step), static_cast<int>(j), y, Quality::kGood);
  }
}

Gain gain(const suite::Row& row, std::uint64_t seed, int steps, Settling settling) {
  const suite::Truth truth = suite::simulate(seed);
  const suite::Readings readings = suite::read(truth, row, seed);
  const auto model = suite::axis_model({}, row);
  Gain out;
  Estimate e;
  Engine live(model);
  constexpr int kFirst = 180;
  auto begin = std::clock();
  const auto busy_us = [&] {
    return 1e6 * static_cast<double>(std::clock() - begin) / CLOCKS_PER_SEC / steps;
  };
  for (int i = 0; i < steps; ++i) {
    feed(live, readings, i);
    live.estimate(axis_time(i), Detail::kBrief, e);
    if (i < kFirst) continue;
    const double error = e.states[0].mean - truth.state[static_cast<std::size_t>(i)](0);
    out.live += square(error);
    out.speed_live += square(e.states[1].mean - truth.state[static_cast<std::size_t>(i)](1));
    out.live_covered += std::fabs(error) < 1.96 * e.states[0].sd;
  }
  out.live_us = busy_us();
  begin = std::clock();
  Settled settled(*model, settling);
  for (int i = 0; i < steps; ++i) feed(settled.engine, readings, i);
  settled.engine.settle_rest();
  out.settled_us = busy_us();
  for (int i = kFirst; i < steps; ++i) {
    const auto& s = settled.all[static_cast<std::size_t>(i)].states;
    const double error = s[0].mean - truth.state[static_cast<std::size_t>(i)](0);
    out.settled += square(error);
    out.speed_settled += square(s[1].mean - truth.state[static_cast<std::size_t>(i)](1));
    out.covered += std::fabs(error) < 1.96 * s[0].sd;
  }
  out.moments = steps - kFirst;
  return out;
}

// The whole table, three seeds and 60 s each, is in engine.md §8.
TEST(Settle, TheAxisGains) {
  const std::vector<suite::Row> rows{
      {"none", {}},
      {"offset 4 sd on a", {{0, suite::Kind::kOffset, 4.0}}},
      {"frozen a", {{0, suite::Kind::kFrozen, 0.0}}},
      {"drift 0.3 sd/s on a", {{0, suite::Kind::kDrift, 0.3}}},
      {"lag 0.5 s on a", {{0, suite::Kind::kLag, 0.5}}},
  };
  for (const auto& row : rows) {
    const Gain g = gain(row, 1, 1500, Settled::settling(2 * kSecond, Detail::kBrief));
    const double ratio = std::sqrt(g.settled / g.live);
    const double speed = std::sqrt(g.speed_settled / g.speed_live);
    const double covered = g.covered / g.moments;
    std::printf(
        "%-20s RMSE of live: position %.3f, speed %.3f; 95 %% covers %.3f (live %.3f); us a moment %.0f "
        "(%.0f)\n",
        row.name.c_str(), ratio, speed, covered, g.live_covered / g.moments, g.settled_us, g.live_us);
    EXPECT_LT(ratio, 0.8) << row.name;
    EXPECT_LT(speed, 0.7) << row.name;
    EXPECT_GT(covered, std::min(0.9, g.live_covered / g.moments)) << row.name;
    EXPECT_LT(covered, 0.99) << row.name;
  }
}

// Hindsight puts an onset where it was: live trust needs readings, settled trust does not wait.
TEST(Settle, AnOnsetIsSettledToTheMoment) {
  const suite::Row row{"offset 4 sd on a", {{0, suite::Kind::kOffset, 4.0}}};
  const suite::Readings readings = suite::read(suite::simulate(1), row, 1);
  Settled settled(*suite::axis_model({}, row), Settled::settling(2 * kSecond, Detail::kBrief));
  Estimate live;
  for (int i = 800; i < 1150; ++i) {
    feed(settled.engine, readings, i);
    if (i == 1002) settled.engine.estimate(axis_time(i), Detail::kBrief, live);
  }
  EXPECT_GT(live.channels[0].trust, 0.5);
  settled.engine.settle_rest();
  EXPECT_GT(settled.all[999 - 800].channels[0].trust, 0.9);
  EXPECT_LT(settled.all[1000 - 800].channels[0].trust, 0.01);
}

// A vector channel and a scalar one for each of two levels; the vector channel is off by 4 sd for a while.
TEST(Settle, AVectorChannelsOffsetIsSeenThrough) {
  suite::Random random(11);
  Model model;
  for (const char* name : {"x", "y"}) {
    model.states.push_back(outside::state(name, 0.0, 1.0, 0.1, {0.0, 0.0}));
    model.channels.push_back(outside::channel(std::string("of_") + name, 0.1,
                                              {name[0] == 'x' ? 1.0 : 0.0, name[0] == 'y' ? 1.0 : 0.0}));
  }
  ChannelModel both = outside::channel("both", 0.05, {1.0, 0.0});
  PartModel second = both;
  second.reads = AffineForm{{0.0, 1.0}, {}, 0.0};
  both.others = {second};
  model.channels.push_back(both);
  for (auto& c : model.channels) {
    c.lo = -100.0;
    c.hi = 100.0;
    c.offset_size = 10.0;
    for (auto& part : c.others) part.lo = -100.0, part.hi = 100.0, part.offset_size = 10.0;
  }
  set_defaults(model, 1.0);
  ASSERT_EQ(model.problem(), "");
  Settled settled(model, 2 * kSecond);
  std::array<double, 2> truth{};
  std::vector<std::array<double, 2>> path;
  double live = 0.0;
  for (int i = 0; i < 400; ++i) {
    const TimeNs t = kSecond + i * 50'000'000LL;
    const double off = i >= 150 && i < 250 ? 0.2 : 0.0;
    for (double& x : truth) x += 0.1 * std::sqrt(0.05) * random.normal();
    path.push_back(truth);
    for (int j = 0; j < 2; ++j)
      settled.engine.read(t, j, truth[static_cast<std::size_t>(j)] + 0.1 * random.normal(), Quality::kGood);
    const std::array<double, 2> pair{truth[0] + off + 0.05 * random.normal(),
                                     truth[1] - off + 0.05 * random.normal()};
    settled.engine.read(t, 2, pair, Quality::kGood);
    const Estimate e = outside::estimate(settled.engine, t);
    live += square(e.states[0].mean - truth[0]) + square(e.states[1].mean - truth[1]);
  }
  settled.engine.settle_rest();
  ASSERT_EQ(settled.all.size(), path.size());
  double hindsight = 0.0;
  for (std::size_t i = 0; i < path.size(); ++i)
    for (std::size_t x = 0; x < 2; ++x) hindsight += square(settled.all[i].states[x].mean - path[i][x]);
  std::printf("vector channel: settled over live RMSE %.3f\n", std::sqrt(hindsight / live));
  EXPECT_LT(std::sqrt(hindsight / live), 0.85);
  EXPECT_LT(settled.all[200].channels[2].trust, 0.05);
  EXPECT_GT(settled.all[100].channels[2].trust, 0.5);
}

}  // namespace
}  // namespace steelyard::engine
