// SPDX-License-Identifier: Apache-2.0
// Numbers stay finite and within their bounds whatever comes: long and short gaps, readings far away, sds
// that differ by fifteen orders.
#include <gtest/gtest.h>

#include "engine/axis.h"
#include "engine/cases.h"

namespace steelyard::engine {
namespace {

void expect_sane(Engine& engine, TimeNs t) {
  Estimate e;
  engine.estimate(t, Detail::kFull, e);
  for (const double x : numbers(e)) ASSERT_TRUE(std::isfinite(x));
  ASSERT_TRUE(std::isfinite(engine.log_evidence()));
  for (const auto& c : e.channels) {
    ASSERT_GE(c.trust, 0.0);
    ASSERT_LE(c.trust, 1.0);
    double sum = 0.0;
    for (const double p : c.probability) {
      ASSERT_GE(p, 0.0);
      ASSERT_LE(p, 1.0 + 1e-12);
      sum += p;
    }
    ASSERT_NEAR(sum, 1.0, 1e-9);
    ASSERT_GE(c.silent, 0.0);
    ASSERT_LE(c.silent, 1.0);
    ASSERT_GT(c.noise_sd, 0.0);
  }
  for (const auto& s : e.states) {
    ASSERT_GE(s.sd, 0.0);
    ASSERT_LE(s.interval90.lo, s.interval90.hi);
  }
  ASSERT_GE(e.hypotheses, 1);
}

std::shared_ptr<Model> axis(const std::vector<double>& sds) {
  auto model = std::make_shared<Model>();
  model->states = {{"position", "m", 0.0, 10.0, 0.0, {}, AffineForm{{0.0, 1.0}, {}, 0.0}},
                   {"speed", "m/s", 0.0, 1.0, 0.3, {}, AffineForm{{0.0, 0.0}, {}, 0.0}}};
  for (const double sd : sds) {
    ChannelModel c;
    c.name = "c" + std::to_string(model->channels.size());
    c.reads = AffineForm{{1.0, 0.0}, {}, 0.0};
    c.sd = sd;
    c.bias_sd = model->channels.empty() ? 0.0 : 10.0 * sd;
    c.lo = -1e10;
    c.hi = 1e10;
    c.period_s = 1.0;
    model->channels.push_back(c);
  }
  set_defaults(*model, 1.0);
  return model;
}

constexpr std::array<TimeNs, 6> kGapsNs{
    1'000, 1'000'000, 1'000'000'000, 3'600'000'000'000, 86'400'000'000'000, 30 * 86'400'000'000'000};

void run(const std::vector<double>& sds, std::uint64_t seed) {
  SCOPED_TRACE("seed " + std::to_string(seed));
  Engine engine(axis(sds));
  Random random(seed);
  TimeNs t = 0;
  for (int i = 0; i < 300; ++i) {
    t += kGapsNs[static_cast<std::size_t>(random.uniform() * kGapsNs.size())];
    for (int j = 0; j < static_cast<int>(sds.size()); ++j) {
      double value = random.normal() * sds[static_cast<std::size_t>(j)];
      if (random.uniform() < 0.1) value = random.uniform() < 0.5 ? 1e9 : -1e9;
      if (random.uniform() < 0.05) value = 1e10;  // the range's end
      engine.read(t, j, value, Quality::kGood);
      if (testing::Test::HasFatalFailure()) return;
    }
    expect_sane(engine, t);
    expect_sane(engine, t + kGapsNs[static_cast<std::size_t>(random.uniform() * kGapsNs.size())]);
    ASSERT_FALSE(testing::Test::HasFatalFailure()) << "at reading " << i;
  }
}

TEST(Extremes, GapsFromAMicrosecondToAMonthAndReadingsFarAway) {
  for (std::uint64_t seed = 1; seed <= 5; ++seed) run({0.01, 0.03, 0.05}, seed);
}

TEST(Extremes, AnSdOfANanometreBesideAMillionMetres) {
  for (std::uint64_t seed = 1; seed <= 5; ++seed) run({1e-9, 1e6}, seed);
}

TEST(Extremes, OneChannelAlone) {
  for (std::uint64_t seed = 1; seed <= 5; ++seed) run({1.0}, seed);
}

// A healthy axis that stands still and unread overnight, for days, for a month. Its position is then expected
// anywhere within kilometres, where a reading within the range is not to be mistaken for a stray: the trust
// of no channel falls, whichever reads first, and the position is known again at once.
TEST(Extremes, AxisIsFoundAgainAfterALongGap) {
  const suite::Row none{"none", {}, {true, true, true, true}, true};
  constexpr int kBreak = 500;
  for (const double days : {0.01, 0.1, 1.0, 3.0, 30.0}) {
    for (std::uint64_t seed = 1; seed <= 3; ++seed) {
      SCOPED_TRACE("seed " + std::to_string(seed) + ", days " + std::to_string(days));
      const auto truth = suite::simulate(seed);
      const auto readings = suite::read(truth, none, seed);
      Engine engine(suite::axis_model({}, none));
      Estimate e;
      double least = 1.0;
      for (int step = 0; step < 1000; ++step) {
        const TimeNs gap = step >= kBreak ? static_cast<TimeNs>(days * 86400e9) : 0;
        const TimeNs t = axis_time(step) + gap;
        for (const int j : {2, 1, 3, 0})  // the coarsest first
          engine.read(t, j, readings.value[static_cast<std::size_t>(j)][static_cast<std::size_t>(step)],
                      Quality::kGood);
        engine.estimate(t, Detail::kBrief, e);
        for (const auto& c : e.channels) least = std::min(least, c.trust);
        if (step < kBreak + 10) continue;
        const double error = e.states[0].mean - truth.state[static_cast<std::size_t>(step)][0];
        ASSERT_LT(std::fabs(error), 6.0 * e.states[0].sd);
        ASSERT_LT(e.states[0].sd, 0.02);
      }
      EXPECT_GE(least, 0.5);
    }
  }
}

// Without strays one reading settles the position. From a spread of up to 1e9 m to 0.05 m the covariance
// update has no digit left: rounding must not make it certain, or the next, finer channel is not heard.
TEST(Extremes, FirstReadingAfterALongGapIsNotTakenForExact) {
  auto model = axis({0.05, 0.01});
  model->options.learn_precision = false;
  model->options.conditions = {true, false, false, false, false, false};
  model->still.on = false;
  model->jolt.on = false;
  for (auto& c : model->channels) {
    c.strays = 0.0;
    c.bias_sd = 0.0;
  }
  for (int days = 1; days <= 60; ++days) {
    SCOPED_TRACE("days " + std::to_string(days));
    Engine engine(model);
    Estimate e;
    engine.read(0, 0, 0.0, Quality::kGood);
    const TimeNs later = days * 86'400'000'000'000;
    engine.read(later, 0, 1.0, Quality::kGood);
    engine.estimate(later, Detail::kBrief, e);
    EXPECT_GE(e.states[0].sd, 0.045);
    engine.read(later, 1, 1.1, Quality::kGood);
    engine.estimate(later, Detail::kBrief, e);
    EXPECT_NEAR(e.states[0].mean, 1.1, 0.02);
  }
}

// A burst of the same time: no gap at all.
TEST(Extremes, ManyReadingsOfOneMoment) {
  auto model = axis({0.1, 0.1});
  for (auto& c : model->channels) c.period_s = 0.0;
  Engine engine(model);
  Random random(6);
  for (int i = 0; i < 500; ++i) engine.read(1'000'000'000, i % 2, 0.1 * random.normal(), Quality::kGood);
  expect_sane(engine, 1'000'000'000);
}

// An estimate before any reading is the start.
TEST(Extremes, NothingReadYet) {
  Engine engine(axis({0.1}));
  Estimate e;
  engine.estimate(5'000'000'000, Detail::kFull, e);
  EXPECT_EQ(e.states[0].mean, 0.0);
  EXPECT_NEAR(e.states[0].sd, 10.0, 1e-12);
  EXPECT_EQ(e.channels[0].age_s, -1.0);
}

// Formulas that have no value everywhere: the root of a level that the Gaussian also believes below zero.
class Root : public Formula {
 public:
  explicit Root(double factor) : factor_(factor) {}
  double evaluate(std::span<const double> states, std::span<const double>, double) override {
    return factor_ * std::sqrt(states[0]);
  }

 private:
  double factor_;
};

TEST(Extremes, FormulasWithoutAValueLeaveTheEngineSane) {
  auto model = std::make_shared<Model>();
  model->states = {{"level", "m", 0.5, 1.0, 0.05, {}, Law{std::make_shared<Root>(-0.1)}}};
  ChannelModel flow;
  flow.name = "flow";
  flow.reads = std::make_shared<Root>(1.0);
  flow.sd = 0.05;
  flow.lo = -1.0;
  flow.hi = 5.0;
  ChannelModel gauge = flow;
  gauge.name = "gauge";
  gauge.reads = AffineForm{{1.0}, {}, 0.0};
  model->channels = {flow, gauge};
  set_defaults(*model, 10.0);
  Engine engine(model);
  Random random(5);
  for (int i = 0; i < 400; ++i) {
    const TimeNs t = i * 1'000'000'000LL;
    const double level = i < 200 ? 0.04 : -0.3;  // the gauge may read below zero, where the law has no value
    engine.read(t, 1, level + 0.05 * random.normal(), Quality::kGood);
    engine.read(t, 0, std::sqrt(std::max(level, 0.0)) + 0.05 * random.normal(), Quality::kGood);
    ASSERT_NO_FATAL_FAILURE(expect_sane(engine, t)) << i;
  }
}

}  // namespace
}  // namespace steelyard::engine
