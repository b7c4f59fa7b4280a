// SPDX-License-Identifier: Apache-2.0
// Are stated variances honest? Errors and innovations of a filter that knows its model, against the χ² bounds
// of Bar-Shalom, Li & Kirubarajan 2001, Estimation with Applications to Tracking and Navigation, s. 5.4.
// Bounds computed with scipy 1.10.1, checked with mpmath to 1e-9.
#include <gtest/gtest.h>

#include <boost/math/distributions/chi_squared.hpp>

#include "outside/csv.h"
#include "outside/machines.h"
#include "suite/random.h"

namespace steelyard::outside {
namespace {

constexpr std::uint64_t kSeed = 1;
constexpr double kNoise = 0.5;
constexpr double kUnrest = 0.3;
constexpr int kSteps = 200;

double chi2(double dof, double p) { return quantile(boost::math::chi_squared(dof), p); }

// The bounds used below come from this function, which the published table checks.
TEST(ChiSquared, QuantilesAreThePublishedOnes) {
  const Csv table = Csv::open("chi2_quantiles.csv");
  ASSERT_GT(table.rows(), 50U);
  for (std::size_t i = 0; i < table.rows(); ++i)
    EXPECT_LT(relative(chi2(table.number(i, "dof"), table.number(i, "p")), table.number(i, "quantile")), 1e-8)
        << "row " << i + 1;
}

TEST(ChiSquared, BoundsOfSumsAndAveragesAreThePublishedOnes) {
  const Csv table = Csv::open("chi2_bounds.csv");
  ASSERT_GT(table.rows(), 20U);
  for (std::size_t i = 0; i < table.rows(); ++i) {
    const double dof = table.number(i, "dof");
    const double tail = 0.5 * (1.0 - table.number(i, "level"));
    EXPECT_EQ(dof, table.number(i, "nx") * table.number(i, "N"));
    EXPECT_LT(relative(chi2(dof, tail), table.number(i, "sum_lo")), 1e-8) << "row " << i + 1;
    EXPECT_LT(relative(chi2(dof, 1.0 - tail), table.number(i, "sum_hi")), 1e-8) << "row " << i + 1;
    EXPECT_LT(relative(chi2(dof, tail) / table.number(i, "N"), table.number(i, "avg_lo")), 1e-8);
    EXPECT_LT(relative(chi2(dof, 1.0 - tail) / table.number(i, "N"), table.number(i, "avg_hi")), 1e-8);
  }
}

struct Sums {
  double innovations = 0.0;  // normalised, squared, of all readings
  double last_error = 0.0;   // of the position after the last reading, normalised and squared
};

engine::Engine tracker(double unrest) {
  engine::Model model = kalman_model();
  model.states = {state("position", 0.0, 1.0, 0.0, {0.0, 1.0}), state("speed", 0.0, 1.0, unrest, {0.0, 0.0})};
  model.channels = {channel("radar", kNoise, {1.0, 0.0})};
  return start(model);
}

// A truth drawn from the model itself, one second a step: exact discretisation of white acceleration, whose
// two increments have the Cholesky factor (√(1/3), 0; √3/2, 1/2) of (1/3 1/2; 1/2 1).
Sums run(suite::Random& random, double believed_unrest) {
  engine::Engine engine = tracker(believed_unrest);
  double position = random.normal();
  double speed = random.normal();
  Sums sums;
  for (int i = 1; i <= kSteps; ++i) {
    const engine::TimeNs t = i * kSecond;
    const auto before = estimate(engine, t);
    const double y = position + kNoise * random.normal();
    const double variance = std::pow(before.states[0].sd, 2) + kNoise * kNoise;
    const double innovation = std::pow(y - before.states[0].mean, 2) / variance;
    const double evidence = engine.log_evidence();
    read(engine, t, 0, y);
    EXPECT_NEAR(engine.log_evidence() - evidence, -0.5 * (innovation + std::log(2.0 * M_PI * variance)),
                1e-9);
    sums.innovations += innovation;
    if (i == kSteps) {
      const auto after = estimate(engine, t);
      sums.last_error = std::pow((after.states[0].mean - position) / after.states[0].sd, 2);
    }
    const double a = random.normal();
    const double b = random.normal();
    position += speed + kUnrest * std::sqrt(1.0 / 3.0) * a;
    speed += kUnrest * (0.5 * std::sqrt(3.0) * a + 0.5 * b);
  }
  return sums;
}

bool within_95(double sum, double dof) { return sum > chi2(dof, 0.025) && sum < chi2(dof, 0.975); }

TEST(Consistency, InnovationsOfOneRunLieWithinTheBounds) {
  suite::Random random(kSeed);
  EXPECT_TRUE(within_95(run(random, kUnrest).innovations, kSteps)) << "seed " << kSeed;
}

Sums runs(int count, double believed_unrest) {
  suite::Random random(kSeed);
  Sums total;
  for (int i = 0; i < count; ++i) {
    const Sums sums = run(random, believed_unrest);
    total.innovations += sums.innovations;
    total.last_error += sums.last_error;
  }
  return total;
}

// 1000 runs: the bounds are then ±9 % for the errors and ±0.6 % for the innovations.
TEST(Consistency, ErrorsAndInnovationsOfManyRunsLieWithinTheBounds) {
  constexpr int kRuns = 1000;
  const Sums sums = runs(kRuns, kUnrest);
  EXPECT_TRUE(within_95(sums.last_error, kRuns)) << sums.last_error << ", seed " << kSeed;
  EXPECT_TRUE(within_95(sums.innovations, kRuns * kSteps)) << sums.innovations << ", seed " << kSeed;
}

// The check can fail: 5 % less or more unrest is found out by the innovations.
TEST(Consistency, WrongUnrestIsFoundOut) {
  constexpr int kRuns = 1000;
  for (const double factor : {0.95, 1.05})
    EXPECT_FALSE(within_95(runs(kRuns, factor * kUnrest).innovations, kRuns * kSteps))
        << factor << ", seed " << kSeed;
}

}  // namespace
}  // namespace steelyard::outside
