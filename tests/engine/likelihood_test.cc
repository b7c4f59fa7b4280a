// SPDX-License-Identifier: Apache-2.0
// One reading's update against dense Kalman and mixture formulas and against quadrature.
#include "engine/likelihood.h"

#include <gtest/gtest.h>

#include <boost/math/quadrature/exp_sinh.hpp>
#include <cmath>

#include "engine/cases.h"
#include "engine/normal.h"

namespace steelyard::engine {
namespace {

using Eigen::MatrixXd;
using Eigen::VectorXd;

const std::vector<std::pair<int, Condition>> kUnsound{{1, Condition::kOffset}, {2, Condition::kStuck}};
constexpr int kRuns = 60;

// A random model and hypothesis, and one reading of a random channel: sound, offset with bias, or stuck.
struct Case {
  Case(std::uint64_t seed, const std::function<void(Model&)>& adapt) : random(seed) {
    auto model = random_model(random, 3, 2, 4);
    adapt(*model);
    scene = std::make_unique<Scene>(model);
    hypothesis = &scene->random_hypothesis(random, kUnsound);
    channel = static_cast<int>(random.uniform() * 4);
    mean = mean_of(*hypothesis);
    cov = covariance_of(*hypothesis);
    noise = hypothesis->noise[channel];
    const Row row = row_of(*scene, *hypothesis, channel);
    column = cov * row.on_z;
    expected = row.on_z.dot(mean) + row.constant;
    s = row.on_z.dot(column);
    const auto& c = declared();
    spec = c.sd * c.sd + c.resolution * c.resolution / 12.0;
    likelihood = std::make_unique<Likelihood>(*scene->model, scene->layout);
  }
  [[nodiscard]] const ChannelModel& declared() const {
    return scene->model->channels[static_cast<std::size_t>(channel)];
  }
  // A reading `sds` from what is expected; its residual is in e.
  Absorbed read(double sds) {
    e = sds * std::sqrt(s + spec);
    occasion = plain_occasion(*scene->model, channel, expected + e);
    return likelihood->absorb(*hypothesis, occasion);
  }
  // The posterior moments must be those of weight · N(m + c·e/S, P − c·cᵀ/S) + (1 − weight) · N(m, P).
  void expect_mixture(double weight, double total) const {
    const VectorXd moved = mean + column * e / total;
    const MatrixXd shrunk = cov - column * column.transpose() / total;
    const VectorXd m = weight * moved + (1.0 - weight) * mean;
    const MatrixXd p = weight * (shrunk + (moved - m) * (moved - m).transpose()) +
                       (1.0 - weight) * (cov + (mean - m) * (mean - m).transpose());
    EXPECT_LT((mean_of(*hypothesis) - m).norm(), 1e-11 * (1.0 + m.norm()));
    EXPECT_LT((covariance_of(*hypothesis) - p).norm(), 1e-11 * (1.0 + p.norm()));
  }

  Random random;
  std::unique_ptr<Scene> scene;
  std::unique_ptr<Likelihood> likelihood;
  Hypothesis* hypothesis = nullptr;
  int channel = 0;
  Occasion occasion;
  VectorXd mean;
  MatrixXd cov;
  VectorXd column;
  Gamma noise;
  double expected = 0.0, s = 0.0, spec = 0.0, e = 0.0;
};

void fixed_precision(Model& model) { model.options.learn_precision = false; }

TEST(Absorb, WithFixedPrecisionIsTheKalmanUpdate) {
  for (std::uint64_t seed = 1; seed <= kRuns; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Case c(seed, fixed_precision);
    const Absorbed a = c.read(c.random.between(-4.0, 4.0));
    EXPECT_NEAR(a.log_likelihood, log_normal(c.e, c.s + c.spec), 1e-11);
    c.expect_mixture(1.0, c.s + c.spec);
    EXPECT_EQ(c.hypothesis->noise[c.channel].a, c.noise.a);
  }
}

TEST(Absorb, WithStraysIsTheTwoPartMixture) {
  for (std::uint64_t seed = 1; seed <= kRuns; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Case c(seed, [](Model& model) {
      fixed_precision(model);
      for (auto& channel : model.channels) {
        channel.strays = 0.1;
        channel.lo = -50.0;
        channel.hi = 50.0;
      }
    });
    const Absorbed a = c.read(c.random.between(-4.0, 4.0));
    const double regular = 0.9 * std::exp(log_normal(c.e, c.s + c.spec));
    const double total = regular + 0.1 / 100.0;
    EXPECT_NEAR(a.log_likelihood, std::log(total), 1e-11);
    c.expect_mixture(regular / total, c.s + c.spec);
  }
}

TEST(Absorb, LearnsThePrecisionAndUsesWhatItLearned) {
  for (std::uint64_t seed = 1; seed <= kRuns; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Case c(seed, [](Model&) {});
    const double before = c.spec / mean_below_one(c.noise);
    const Absorbed a = c.read(c.random.between(-4.0, 4.0));
    EXPECT_NEAR(a.log_likelihood, log_student_t(c.e, c.noise.a, c.s + before), 1e-11);
    const Gamma& g = c.hypothesis->noise[c.channel];
    const double r = c.spec / mean_below_one(g);
    c.expect_mixture(1.0, c.s + r);
    // The score and the Fisher information of log κ in N(e; 0, s + spec/κ), at the κ that comes out.
    const double share = r / (c.s + r);
    EXPECT_NEAR(g.a, c.noise.a + 0.5 * share * share, 5e-3 * g.a);
    const double surprise = c.e * c.e / (c.s + r) - 1.0;
    EXPECT_NEAR(g.b, c.noise.b + 0.5 * (share * share + share * surprise) * r / c.spec, 1e-2 * g.b);
  }
}

TEST(Absorb, CountsTheBinOfACoarseReading) {
  for (std::uint64_t seed = 1; seed <= kRuns; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Case c(seed, [](Model& model) {
      fixed_precision(model);
      for (auto& channel : model.channels) channel.resolution = 10.0 * channel.sd + 3.0;
    });
    const Absorbed a = c.read(c.random.between(-1.0, 1.0));
    const double sd = std::sqrt(c.s + c.spec);
    const double step = c.declared().resolution;
    const double bin =
        step > 0.3 * sd ? bin_probability(c.e, sd, step) / step : std::exp(log_normal(c.e, c.s + c.spec));
    EXPECT_NEAR(a.log_likelihood, std::log(bin), 1e-11);
  }
}

TEST(Absorb, KnowsHowLikelyARepeatIs) {
  for (std::uint64_t seed = 1; seed <= kRuns; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Case c(seed, [](Model& model) {
      for (auto& channel : model.channels) channel.resolution = 0.2;
    });
    const Absorbed a = c.read(0.5);
    const double sd = std::sqrt(c.s + c.spec / mean_below_one(c.noise));
    EXPECT_NEAR(a.repeat_probability, bin_probability(c.occasion.last_value - c.expected, sd, 0.2), 1e-12);
  }
}

TEST(Absorb, TakesAnglesTheShortWayRound) {
  for (std::uint64_t seed = 1; seed <= kRuns; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Case c(seed, [](Model& model) {
      fixed_precision(model);
      for (auto& channel : model.channels) channel.modulo = 360.0;
    });
    c.e = 1.5;
    c.occasion = plain_occasion(*c.scene->model, c.channel, c.expected + c.e - 720.0);
    const Absorbed a = c.likelihood->absorb(*c.hypothesis, c.occasion);
    EXPECT_NEAR(a.log_likelihood, log_normal(c.e, c.s + c.spec), 1e-9);
    const VectorXd moved = c.mean + c.column * c.e / (c.s + c.spec);
    EXPECT_LT((mean_of(*c.hypothesis) - moved).norm(), 1e-9);
  }
}

struct Tail {
  double log_probability;
  double mean;
  double variance;
};

// A normal cut off to below `bound`, by quadrature of its density relative to that at the bound.
Tail below(double mean, double variance, double bound) {
  boost::math::quadrature::exp_sinh<double> integrator;
  const auto moment = [&](int power) {
    return integrator.integrate([&](double x) {
      const double d = bound - x - mean;
      const double ratio = std::exp(-0.5 * (d * d - (bound - mean) * (bound - mean)) / variance);
      return ratio > 0.0 ? std::pow(x, power) * ratio : 0.0;
    });
  };
  const double mass = moment(0);
  const double first = moment(1) / mass;
  const double second = moment(2) / mass;
  return {std::log(mass) + log_normal(bound - mean, variance), bound - first, second - first * first};
}

TEST(Absorb, CensoredReadingIsTheQuadratureOfTheTail) {
  for (std::uint64_t seed = 1; seed <= kRuns; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Case c(seed, fixed_precision);
    const bool under = seed % 2 == 0;
    const double total = c.s + c.spec;
    const double bound = c.expected + c.random.between(-6.0, 6.0) * std::sqrt(total);
    c.occasion = plain_occasion(*c.scene->model, c.channel, bound);
    c.occasion.censoring = under ? Censoring::kBelow : Censoring::kAbove;
    c.occasion.bound = bound;
    c.occasion.regular = seed % 3 == 0 ? 0.8 : 1.0;
    c.occasion.elsewhere = 0.05;
    const Absorbed a = c.likelihood->absorb(*c.hypothesis, c.occasion);
    // Above is below, mirrored.
    const double sign = under ? 1.0 : -1.0;
    const Tail tail = below(sign * c.expected, total, sign * bound);
    const double inside = c.occasion.regular * std::exp(tail.log_probability);
    const double outside = (1.0 - c.occasion.regular) * 0.05;
    EXPECT_NEAR(a.log_likelihood, std::log(inside + outside), 1e-9);
    const double weight = inside / (inside + outside);
    const VectorXd gain = c.column / total;
    const double shift = sign * tail.mean - c.expected;
    const VectorXd m = c.mean + gain * (weight * shift);
    const MatrixXd p =
        c.cov + gain * gain.transpose() *
                    (weight * (tail.variance - total) + weight * (1.0 - weight) * shift * shift);
    EXPECT_LT((mean_of(*c.hypothesis) - m).norm(), 1e-8 * (1.0 + m.norm()));
    EXPECT_LT((covariance_of(*c.hypothesis) - p).norm(), 1e-8 * (1.0 + p.norm()));
  }
}

// A reading at the end where the machine is expected far beyond it tells nothing.
TEST(Absorb, CensoredReadingThatWasCertainChangesNothing) {
  Case c(7, [](Model&) {});
  c.occasion = plain_occasion(*c.scene->model, c.channel, 0.0);
  c.occasion.censoring = Censoring::kBelow;
  c.occasion.bound = c.expected + 60.0 * std::sqrt(c.s + c.spec / mean_below_one(c.noise));
  const Absorbed a = c.likelihood->absorb(*c.hypothesis, c.occasion);
  EXPECT_NEAR(a.log_likelihood, 0.0, 1e-12);
  EXPECT_LT((mean_of(*c.hypothesis) - c.mean).norm(), 1e-12);
  EXPECT_LT((covariance_of(*c.hypothesis) - c.cov).norm(), 1e-12);
}

// A covariance greater than the variances allow comes of rounding beside a huge variance. Taken at its word
// it would make a variance negative.
TEST(Absorb, CovarianceThatIsRoundingErrorMovesNothing) {
  for (std::uint64_t seed = 1; seed <= kRuns; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Case c(seed, fixed_precision);
    const int own = c.hypothesis->own_at[2];
    if (c.channel == 2) continue;  // the stuck channel reads its own number
    const double variance = 1e-18;
    for (int i = 0; i < c.hypothesis->dim; ++i)
      c.hypothesis->p(own, i) = c.hypothesis->p(i, own) = i == own ? variance : 1e-3;
    const double level = c.hypothesis->mean[own];
    c.read(2.0);
    EXPECT_EQ(c.hypothesis->p(own, own), variance);
    EXPECT_EQ(c.hypothesis->mean[own], level);
    for (int i = 0; i < c.hypothesis->dim; ++i) EXPECT_GT(c.hypothesis->p(i, i), 0.0);
  }
}

TEST(Absorb, InfluenceIsTheGainOnTheStatesAlone) {
  for (std::uint64_t seed = 1; seed <= kRuns; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Case c(seed, fixed_precision);
    const Row row = row_of(*c.scene, *c.hypothesis, c.channel);
    const Absorbed a = c.read(0.3);
    double sum = 0.0;
    if (c.hypothesis->conditions.of(c.channel) != Condition::kStuck)
      for (int i = 0; i < c.scene->layout.states; ++i) sum += row.on_z(i) * c.column(i) / (c.s + c.spec);
    EXPECT_NEAR(a.influence, sum, 1e-12);
  }
}

}  // namespace
}  // namespace steelyard::engine
