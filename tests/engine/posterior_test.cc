// SPDX-License-Identifier: Apache-2.0
// What must hold of the set of hypotheses at every moment of a run with faults.
#include "engine/posterior.h"

#include <gtest/gtest.h>

#include "engine/axis.h"
#include "engine/cases.h"

namespace steelyard::engine {
namespace {

constexpr std::uint64_t kSeed = 2;

void expect_covariance(const Hypothesis& h) {
  const Eigen::MatrixXd p = covariance_of(h);
  EXPECT_LT((p - p.transpose()).norm(), 1e-13 * p.norm());
  // Scaled to unit variances: what is left is free of units.
  const Eigen::VectorXd scale = p.diagonal().cwiseSqrt().cwiseInverse();
  const Eigen::MatrixXd r = scale.asDiagonal() * p * scale.asDiagonal();
  EXPECT_GT(Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd>(0.5 * (r + r.transpose())).eigenvalues()(0),
            -1e-9);
}

TEST(PosteriorSet, StaysNormalisedSymmetricAndInOrder) {
  const auto readings = axis_readings(kSeed);
  Posterior posterior(suite::axis_model({}, double_fault()));
  for (int step = 0; step < 2200; ++step) {
    read_moment(posterior, readings, step);
    double sum = 0.0;
    for (int i = 0; i < posterior.now.size(); ++i) {
      sum += std::exp(posterior.now[i].log_weight);
      if (i > 0) {
        EXPECT_TRUE(key_less(posterior.now[i - 1], posterior.now[i])) << "step " << step;
      }
    }
    EXPECT_NEAR(sum, 1.0, 1e-12) << "step " << step;
    EXPECT_LE(posterior.now.size(), posterior.model->options.max_hypotheses);
    if (step % 10 != 0) continue;
    SCOPED_TRACE("seed " + std::to_string(kSeed) + ", step " + std::to_string(step));
    for (int i = 0; i < posterior.now.size(); ++i) expect_covariance(posterior.now[i]);
  }
}

TEST(PosteriorSet, CarriesOnlyTheOffsetsThatItsConditionsNeed) {
  const auto readings = axis_readings(kSeed);
  Posterior posterior(suite::axis_model({}, double_fault()));
  for (int step = 0; step < 1500; ++step) {
    read_moment(posterior, readings, step);
    for (int i = 0; i < posterior.now.size(); ++i) {
      const Hypothesis& h = posterior.now[i];
      int own = 0;
      for (int j = 0; j < suite::kChannels; ++j) {
        ASSERT_EQ(has_own(h.conditions.of(j)), h.own_at[static_cast<std::size_t>(j)] >= 0);
        own += has_own(h.conditions.of(j)) + has_rate(h.conditions.of(j));
      }
      ASSERT_EQ(h.dim, posterior.layout.fixed + own);
    }
  }
}

TEST(PosteriorSet, FindsTheFaults) {
  const auto readings = axis_readings(kSeed);
  Engine engine(suite::axis_model({}, double_fault()));
  Estimate e;
  for (int step = 0; step <= 1500; ++step) read_moment(engine, readings, step);
  engine.estimate(axis_time(1500), Detail::kFull, e);
  EXPECT_GT(e.channels[0].probability[1] + e.channels[0].probability[2] + e.channels[0].probability[3], 0.95);
  EXPECT_GT(e.channels[3].probability[static_cast<std::size_t>(Condition::kFrozen)], 0.95);
  EXPECT_NEAR(e.channels[0].offset, 20.0 * suite::kSd[0], 4.0 * e.channels[0].offset_sd);
  for (const auto& c : e.channels) {
    double sum = 0.0;
    for (const double p : c.probability) sum += p;
    EXPECT_NEAR(sum, 1.0, 1e-12);
  }
  ASSERT_FALSE(e.explanations.empty());
  EXPECT_EQ(e.explanations[0].findings.size(), 2U);
}

}  // namespace
}  // namespace steelyard::engine
