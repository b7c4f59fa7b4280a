// SPDX-License-Identifier: Apache-2.0
// Kalman filters with known answers: scalar Riccati equations, Kalata's tracking gains, an asynchronous
// three-channel likelihood. The engine runs them through its public interface, with one hypothesis.
#include <gtest/gtest.h>

#include "outside/csv.h"
#include "outside/machines.h"

namespace steelyard::outside {
namespace {

// x_next = phi·x + N(0, q) each second, as the exact discretisation of a linear rate.
engine::Engine scalar(double phi, double q, double r) {
  const double rate = std::log(phi);
  const double density = rate == 0.0 ? q : 2.0 * rate * q / std::expm1(2.0 * rate);
  engine::Model model = kalman_model();
  model.states = {state("x", 0.0, 1.0, std::sqrt(density), {rate})};
  model.channels = {channel("y", std::sqrt(r), {1.0})};
  return start(model);
}

// Source: closed form P = q/2 + √(q²/4 + qr) for phi = 1 (golden ratio at q = r = 1) and its extension to
// other phi, against scipy 1.10.1's solve_discrete_are. The catalogue's tolerance 1e-12 holds for the
// equation's solution; the engine counts rounding, 1e-15 of P, as spread, which costs the filtered variance
// 1e-15·P/r: at P/r = 1e4 it is held to 1e-10.
TEST(Riccati, SteadyVariancesAndGainsAreTheClosedForms) {
  const Csv table = Csv::open("scalar_dare.csv");
  ASSERT_EQ(table.rows(), 11U);
  for (std::size_t i = 0; i < table.rows(); ++i) {
    SCOPED_TRACE("row " + std::to_string(i + 1));
    const double r = table.number(i, "r");
    engine::Engine engine = scalar(table.number(i, "phi"), table.number(i, "q"), r);
    engine::TimeNs t = 0;
    for (int k = 0; k < 20000; ++k, t += kSecond) read(engine, t, 0, 0.0);
    const double filtered = std::pow(estimate(engine, t - kSecond).states[0].sd, 2);
    const double predicted = std::pow(estimate(engine, t).states[0].sd, 2);
    read(engine, t, 0, 1.0);
    const double gain = estimate(engine, t).states[0].mean;
    const double tolerance = predicted > 100.0 * r ? 1e-10 : 1e-12;
    EXPECT_LT(relative(filtered, table.number(i, "P_filt")), tolerance);
    EXPECT_LT(relative(predicted, table.number(i, "P_pred_closed")), tolerance);
    EXPECT_LT(relative(gain, table.number(i, "K")), tolerance);
  }
}

constexpr double kPeriod = 0.5;

// Kalata's model: the acceleration is constant over each step, and independent from step to step. To the
// engine that is a known input, commanded anew each step with standard uncertainty sw.
engine::Engine tracker(double sw, double sv) {
  engine::Model model = kalman_model();
  engine::InputModel push;
  push.name = "push";
  push.sd = sw;
  push.lo = -1e9;
  push.hi = 1e9;
  model.inputs = {push};
  model.states = {state("position", 0.0, 1.0, 0.0, {0.0, 1.0}), state("speed", 0.0, 1.0, 0.0, {0.0, 0.0})};
  std::get<engine::AffineForm>(model.states[0].rate).on_inputs = {0.0};
  std::get<engine::AffineForm>(model.states[1].rate).on_inputs = {1.0};
  model.channels = {channel("radar", sv, {1.0, 0.0})};
  std::get<engine::AffineForm>(model.channels[0].reads).on_inputs = {0.0};
  return start(model);
}

// Source: Kalata 1984, IEEE Trans. Aerospace and Electronic Systems 20(2):174; Bar-Shalom, Li & Kirubarajan
// 2001 s. 6.5. Numbers computed from the published formulas, agreeing with solve_discrete_are to 1e-9, which
// is the catalogue's tolerance.
TEST(Kalata, SteadyGainsAndCovariancesAreThePublishedOnes) {
  const Csv table = Csv::open("kalata_alpha_beta.csv");
  ASSERT_EQ(table.rows(), 17U);
  for (std::size_t i = 0; i < table.rows(); ++i) {
    const double index = table.number(i, "lambda");
    SCOPED_TRACE("tracking index " + std::to_string(index));
    const double sv = 0.3;
    engine::Engine engine = tracker(index * sv / (kPeriod * kPeriod), sv);
    engine::TimeNs t = 0;
    for (int k = 0; k < 4000; ++k, t += kSecond / 2) {
      engine.set_input(t, 0, 0.0, true);
      read(engine, t, 0, 0.0);
    }
    const auto steady = estimate(engine, t - kSecond / 2);
    EXPECT_LT(relative(std::pow(steady.states[0].sd / sv, 2), table.number(i, "Pfilt11_over_R")), 1e-9);
    EXPECT_LT(relative(std::pow(steady.states[1].sd * kPeriod / sv, 2), table.number(i, "Pfilt22_T2_over_R")),
              1e-9);
    engine.set_input(t, 0, 0.0, true);
    read(engine, t, 0, 1.0);
    const auto moved = estimate(engine, t);
    EXPECT_LT(relative(moved.states[0].mean, table.number(i, "alpha")), 1e-9);
    EXPECT_LT(relative(moved.states[1].mean * kPeriod, table.number(i, "beta")), 1e-9);
  }
}

// Source: constant velocity (Bar-Shalom, Li & Kirubarajan 2001 s. 6.2) with invented readings, every position
// A, every third position B, speed with a gap; computed with statsmodels 0.13.5 and an independent recursion
// that agrees to 7e-14.
TEST(ThreeChannels, AsynchronousEvidenceAndMomentsAreThePublishedOnes) {
  const Csv table = Csv::open("cv3.csv");
  engine::Model model = kalman_model();
  model.states = {state("position", 0.0, 10.0, 0.0, {0.0, 1.0}),
                  state("speed", 0.0, std::sqrt(10.0), std::sqrt(0.2), {0.0, 0.0})};
  model.channels = {channel("a", 0.5, {1.0, 0.0}), channel("b", 2.0, {1.0, 0.0}),
                    channel("v", 0.3, {0.0, 1.0})};
  engine::Engine engine = start(model);
  double before = 0.0;
  for (std::size_t i = 0; i < table.rows(); ++i) {
    const engine::TimeNs t = kSecond + static_cast<engine::TimeNs>(i) * kSecond / 2;
    const std::array<const char*, 3> names{"yA", "yB", "yV"};
    for (int j = 0; j < 3; ++j)
      if (const auto y = table.reading(i, names[static_cast<std::size_t>(j)])) read(engine, t, j, *y);
    const auto e = estimate(engine, t);
    EXPECT_NEAR(e.states[0].mean, table.number(i, "m_pos"), 1e-9) << "step " << i;
    EXPECT_NEAR(e.states[1].mean, table.number(i, "m_vel"), 1e-9) << "step " << i;
    EXPECT_LT(relative(std::pow(e.states[0].sd, 2), table.number(i, "P00")), 1e-9) << "step " << i;
    EXPECT_LT(relative(std::pow(e.states[1].sd, 2), table.number(i, "P11")), 1e-9) << "step " << i;
    EXPECT_NEAR(engine.log_evidence() - before, table.number(i, "loglik_step"), 1e-9) << "step " << i;
    before = engine.log_evidence();
  }
  EXPECT_NEAR(engine.log_evidence(), -104.34138970531784, 1e-9);
}

}  // namespace
}  // namespace steelyard::outside
