// SPDX-License-Identifier: Apache-2.0
// A local level read by a vector channel of two correlated parts with an unknown precision matrix, against
// the exact posterior. Source: simulated data (80 steps, true noise sds 0.5 and 1, correlation 0.8); exact
// posterior by three-dimensional quadrature (to 1e-7 from t = 5; JAGS 4.3.1 agrees within its Monte Carlo
// error).
#include <gtest/gtest.h>

#include <cstdio>

#include "engine/posterior.h"
#include "outside/csv.h"
#include "outside/machines.h"

namespace steelyard::outside {
namespace {

// x1 ~ N(10, 1), steps N(0, 0.01); the precision matrix ~ Wishart(I, 4), mean 4 I: sds of 0.5. The engine's
// prior has ν = prior_readings + parts − 1.
std::shared_ptr<const engine::Model> two_correlated_parts() {
  auto model = std::make_shared<engine::Model>(kalman_model());
  model->options.learn_precision = true;
  model->states = {state("x", 10.0, 1.0, 0.1, {0.0})};
  engine::ChannelModel c = channel("y", 0.5, {1.0});
  c.prior_readings = 3.0;
  c.others.push_back(c);
  model->channels.push_back(std::move(c));
  return model;
}

struct Precision {
  double first = 0.0;
  double second = 0.0;
  double between = 0.0;
  [[nodiscard]] double correlation() const { return -between / std::sqrt(first * second); }
};

// Mean of the precision matrix in the channel's units; the parts' datasheets are equal and independent.
Precision precision(const engine::Posterior& posterior) {
  constexpr double kSpec = 1.0 / (0.5 * 0.5);
  const double* shape = posterior.now[0].shape + posterior.layout.shape_at[0];
  return {kSpec * shape[0], kSpec * shape[3], kSpec * shape[1]};
}

TEST(Wishart, StateAndCorrelationAreNearTheExactPosterior) {
  const Csv readings = Csv::open("wishart_readings.csv");
  const Csv exact = Csv::open("wishart_exact.csv");
  ASSERT_EQ(readings.rows(), 80U);
  const auto model = two_correlated_parts();
  ASSERT_EQ(model->problem(), "");
  engine::Posterior posterior(model);
  std::size_t row = 0;
  for (std::size_t i = 0; i < readings.rows(); ++i) {
    const auto t = static_cast<engine::TimeNs>(i + 1) * kSecond;
    const std::array<double, 2> y{readings.number(i, "y1"), readings.number(i, "y2")};
    ASSERT_EQ(posterior.read(t, 0, y, engine::Quality::kGood, 0), engine::Fate::kFused);
    if (row >= exact.rows() || exact.number(row, "t") != static_cast<double>(i + 1)) continue;
    SCOPED_TRACE("t = " + std::to_string(i + 1));
    ASSERT_EQ(posterior.now.size(), 1);
    const auto& h = posterior.now[0];
    const double off = (h.mean[0] - exact.number(row, "x_mean")) / exact.number(row, "x_sd");
    const double ratio = std::sqrt(h.p(0, 0)) / exact.number(row, "x_sd");
    const Precision p = precision(posterior);
    const double rho = exact.number(row, "rho_noise_mean");
    std::printf(
        "t = %2zu: mean off by %+.3f sd, sd ratio %.3f, correlation %.3f (exact %.3f), precisions %.2f %.2f "
        "(exact %.2f %.2f)\n",
        i + 1, off, ratio, p.correlation(), rho, p.first, p.second, exact.number(row, "Om11_mean"),
        exact.number(row, "Om22_mean"));
    ++row;
    if (i + 1 < 5) continue;
    EXPECT_LE(std::fabs(off), 0.5);
    if (i + 1 < 20) continue;  // before, the data tell little of the correlation, and its posterior is wide
    EXPECT_LE(std::fabs(p.correlation() - rho), 0.1);
    EXPECT_GE(ratio, 0.85);
    EXPECT_LE(ratio, 1.15);
  }
  EXPECT_EQ(row, exact.rows());
}

}  // namespace
}  // namespace steelyard::outside
