// SPDX-License-Identifier: Apache-2.0
// Growing, shrinking and merging of hypotheses against labelled dense copies and mixture formulas.
#include "engine/hypothesis.h"

#include <gtest/gtest.h>

#include <map>

#include "engine/cases.h"

namespace steelyard::engine {
namespace {

// Moments by label: i < 100 for the fixed part, 100 + channel for own numbers.
struct Labelled {
  std::map<int, double> mean;
  std::map<std::pair<int, int>, double> cov;
};

std::vector<int> labels(const Scene& scene, const Hypothesis& h) {
  std::vector<int> out(static_cast<std::size_t>(h.dim), -1);
  for (int i = 0; i < scene.layout.fixed; ++i) out[static_cast<std::size_t>(i)] = i;
  for (int j = 0; j < scene.layout.channels; ++j) {
    const int at = h.own_at[static_cast<std::size_t>(j)];
    if (at >= 0) out.at(static_cast<std::size_t>(at)) = 100 + j;
  }
  return out;
}

void expect_equal(const Scene& scene, const Hypothesis& h, const Labelled& expected,
                  const std::string& where) {
  const auto name = labels(scene, h);
  ASSERT_EQ(name.size(), expected.mean.size()) << where;
  for (std::size_t i = 0; i < name.size(); ++i) {
    ASSERT_GE(name[i], 0) << where;
    EXPECT_EQ(h.mean[i], expected.mean.at(name[i])) << where;
    if (i > 0) {
      EXPECT_LT(name[i - 1], name[i]) << where << ": own numbers stand in the order of channels";
    }
    for (std::size_t k = 0; k < name.size(); ++k)
      EXPECT_EQ(h.p(static_cast<int>(i), static_cast<int>(k)), expected.cov.at({name[i], name[k]})) << where;
  }
}

TEST(OwnNumbers, ComeAndGoWithoutTouchingTheRest) {
  constexpr std::uint64_t kSeed = 21;
  Random random(kSeed);
  for (int run = 0; run < 30; ++run) {
    Scene scene(random_model(random, 3, 1, 6));
    Hypothesis& h = scene.random_hypothesis(random);
    Labelled dense;
    for (int i = 0; i < h.dim; ++i) {
      dense.mean[i] = h.mean[i];
      for (int k = 0; k < h.dim; ++k) dense.cov[{i, k}] = h.p(i, k);
    }
    for (int step = 0; step < 40; ++step) {
      const int channel = static_cast<int>(random.uniform() * 6);
      const int own = 100 + channel;
      if (h.own_at[static_cast<std::size_t>(channel)] >= 0) {
        drop_own(h, channel);
        dense.mean.erase(own);
        std::erase_if(dense.cov,
                      [&](const auto& e) { return e.first.first == own || e.first.second == own; });
      } else {
        const double mean = random.normal();
        const double variance = random.uniform();
        std::vector<double> cross(static_cast<std::size_t>(h.dim));
        const auto name = labels(scene, h);
        for (std::size_t i = 0; i < cross.size(); ++i) {
          cross[i] = random.normal();
          dense.cov[{own, name[i]}] = dense.cov[{name[i], own}] = cross[i];
        }
        add_own(h, channel, mean, variance, cross.data());
        dense.mean[own] = mean;
        dense.cov[{own, own}] = variance;
      }
      expect_equal(scene, h, dense, "seed " + std::to_string(kSeed) + ", run " + std::to_string(run));
    }
  }
}

TEST(Merge, KeepsTheMixturesMoments) {
  constexpr std::uint64_t kSeed = 22;
  Random random(kSeed);
  for (int run = 0; run < 50; ++run) {
    Scene scene(random_model(random, 3, 1, 4));
    const std::vector<std::pair<int, Condition>> unsound{{2, Condition::kOffset}};
    Hypothesis& a = scene.random_hypothesis(random, unsound);
    Hypothesis& b = scene.random_hypothesis(random, unsound);
    const double wa = std::exp(a.log_weight);
    const double wb = std::exp(b.log_weight);
    const double pa = wa / (wa + wb);
    const double pb = wb / (wa + wb);
    const Eigen::VectorXd mean = pa * mean_of(a) + pb * mean_of(b);
    const Eigen::VectorXd da = mean_of(a) - mean;
    const Eigen::VectorXd db = mean_of(b) - mean;
    const Eigen::MatrixXd cov =
        pa * (covariance_of(a) + da * da.transpose()) + pb * (covariance_of(b) + db * db.transpose());
    const Gamma ga = a.noise[1];
    const Gamma gb = b.noise[1];
    merge(a, b, scene.layout);
    const std::string where = "seed " + std::to_string(kSeed) + ", run " + std::to_string(run);
    EXPECT_NEAR(std::exp(a.log_weight), wa + wb, 1e-14) << where;
    EXPECT_LT((mean_of(a) - mean).norm(), 1e-13) << where;
    EXPECT_LT((covariance_of(a) - cov).norm(), 1e-13) << where;
    const double la = std::log(ga.mean());
    const double lb = std::log(gb.mean());
    const double log_mean = pa * la + pb * lb;
    const auto spread = [](double shape) { return 1.0 / shape + 0.5 / (shape * shape); };
    const double variance = pa * (spread(ga.a) + (la - log_mean) * (la - log_mean)) +
                            pb * (spread(gb.a) + (lb - log_mean) * (lb - log_mean));
    EXPECT_NEAR(std::log(a.noise[1].mean()), log_mean, 1e-12) << where;
    EXPECT_NEAR(spread(a.noise[1].a), variance, 1e-12) << where;
  }
}

TEST(Merge, NextToNothingChangesNothing) {
  Random random(23);
  Scene scene(random_model(random, 2, 0, 2));
  Hypothesis& a = scene.random_hypothesis(random);
  Hypothesis& b = scene.random_hypothesis(random);
  const Eigen::VectorXd mean = mean_of(a);
  b.log_weight = a.log_weight - 1000.0;
  const double weight = a.log_weight;
  merge(a, b, scene.layout);
  EXPECT_EQ(mean_of(a), mean);
  EXPECT_EQ(a.log_weight, weight);
}

TEST(ConditionsOfChannels, AreKeptApart) {
  Conditions c;
  for (int j = 0; j < kMaxChannels; ++j) c.set(j, static_cast<Condition>(j % kConditions));
  for (int j = 0; j < kMaxChannels; ++j) EXPECT_EQ(c.of(j), static_cast<Condition>(j % kConditions)) << j;
  c.set(17, Condition::kFrozen);
  EXPECT_EQ(c.of(17), Condition::kFrozen);
  EXPECT_EQ(c.of(16), static_cast<Condition>(16 % kConditions));
  EXPECT_EQ(c.of(18), static_cast<Condition>(18 % kConditions));
}

TEST(PoolOfHypotheses, CopyIsIndependent) {
  Random random(24);
  Scene scene(random_model(random, 2, 0, 2));
  scene.random_hypothesis(random);
  scene.random_hypothesis(random);
  scene.pool.swap_items(0, 1);
  Pool copy = scene.pool;
  const double kept = scene.pool[0].mean[0];
  copy[0].mean[0] += 1.0;
  copy[0].noise[0].a += 1.0;
  EXPECT_EQ(scene.pool[0].mean[0], kept);
  EXPECT_EQ(copy[1].mean[0], scene.pool[1].mean[0]);
  EXPECT_NE(copy[0].noise[0].a, scene.pool[0].noise[0].a);
}

// The rate stands right behind its offset, and all of a channel's numbers go together.
TEST(OwnNumbers, ARateComesAndGoesWithItsOffset) {
  constexpr std::uint64_t kSeed = 22;
  Random random(kSeed);
  Scene scene(random_model(random, 2, 0, 3));
  Hypothesis& h = scene.random_hypothesis(random);
  for (int j = 0; j < 3; ++j)
    if (h.own_at[static_cast<std::size_t>(j)] >= 0) drop_own(h, j);
  const std::array<double, kMaxDim> none{};
  add_own(h, 2, 7.0, 3.0, none.data());
  add_own(h, 0, 5.0, 2.0, none.data());
  add_rate(h, 0, std::array{0.25});
  const int at = h.own_at[0];
  EXPECT_EQ(h.own_at[2], at + 2);
  EXPECT_EQ(h.mean[at + 1], 0.0);
  EXPECT_EQ(h.p(at + 1, at + 1), 0.25);
  EXPECT_EQ(h.mean[at + 2], 7.0);
  const int dim = h.dim;
  drop_rate(h, 0, 1);
  EXPECT_EQ(h.dim, dim - 1);
  EXPECT_EQ(h.own_at[2], at + 1);
  add_rate(h, 0, std::array{0.25});
  drop_own(h, 0);
  EXPECT_EQ(h.dim, dim - 2);
  EXPECT_EQ(h.own_at[0], -1);
  EXPECT_EQ(h.mean[h.own_at[2]], 7.0);
}

}  // namespace
}  // namespace steelyard::engine
