// SPDX-License-Identifier: Apache-2.0
// Weights on the way back, against enumeration of condition paths and numerical integration.
#include <gtest/gtest.h>

#include <Eigen/Dense>
#include <cmath>
#include <cstdio>
#include <limits>

#include "engine/cases.h"
#include "engine/settle_evidence.h"
#include "engine/settled.h"
#include "outside/csv.h"
#include "outside/machines.h"

namespace steelyard::engine {
namespace {

using outside::Csv;
using outside::kalman_model;
using outside::kSecond;
using outside::relative;

constexpr TimeNs kForEver = std::numeric_limits<TimeNs>::max();

/// The model of tests/outside/switching_offsets_test.cc, smoothed exactly: all condition paths of two
/// channels over eight steps, each with the joint Gaussian of x at all steps and the offsets in force.
class Paths {
 public:
  static constexpr int kPathSteps = 8;
  using Vector = Eigen::Matrix<double, kPathSteps + 2, 1>;
  using Matrix = Eigen::Matrix<double, kPathSteps + 2, kPathSteps + 2>;

  Paths(const Csv& table, std::size_t first_row)
      : table_(table),
        first_(first_row),
        log_scale_(table.number(first_row + kPathSteps - 1, "log_evidence")) {
    Node root;
    for (int i = 0; i < kPathSteps; ++i) {
      root.mean(i) = 20.0;
      for (int k = 0; k < kPathSteps; ++k) root.cov(i, k) = 1.0 + 0.0025 * std::min(i, k);
    }
    fuse(root, 0);
  }
  [[nodiscard]] double offset(int step, int channel) const { return offset_(step, channel) / total_; }
  [[nodiscard]] double mean(int step) const { return mean_(step) / total_; }
  [[nodiscard]] double variance(int step) const { return square_(step) / total_ - mean(step) * mean(step); }

 private:
  struct Node {
    double log_weight = 0.0;
    std::array<std::array<bool, 2>, kPathSteps> off{};
    Vector mean = Vector::Zero();
    Matrix cov = Matrix::Zero();
  };
  void fuse(Node& n, int step) {
    for (int c = 0; c < 2; ++c) {
      Vector row = Vector::Zero();
      row(step) = 1.0;
      if (n.off[static_cast<std::size_t>(step)][static_cast<std::size_t>(c)]) row(kPathSteps + c) = 1.0;
      const Vector column = n.cov * row;
      const double total = row.dot(column) + 0.04;
      const double e =
          table_.number(first_ + static_cast<std::size_t>(step), c ? "y2" : "y1") - row.dot(n.mean);
      n.log_weight -= 0.5 * (std::log(2.0 * M_PI * total) + e * e / total);
      n.mean += column * (e / total);
      n.cov -= column * column.transpose() / total;
    }
    if (step + 1 == kPathSteps) return gather(n);
    for (int next = 0; next < 4; ++next) fork(n, step + 1, {(next & 1) != 0, (next & 2) != 0});
  }
  void fork(const Node& from, int step, std::array<bool, 2> off) {
    Node n = from;
    n.off[static_cast<std::size_t>(step)] = off;
    for (std::size_t c = 0; c < 2; ++c) {
      const bool was = from.off[static_cast<std::size_t>(step - 1)][c];
      n.log_weight += std::log(was ? (off[c] ? 0.95 : 0.05) : (off[c] ? 0.02 : 0.98));
      if (was || !off[c]) continue;
      const auto at = kPathSteps + static_cast<Eigen::Index>(c);
      n.cov.row(at).setZero();
      n.cov.col(at).setZero();
      n.cov(at, at) = 25.0;
      n.mean(at) = 0.0;
    }
    fuse(n, step);
  }
  void gather(const Node& n) {
    const double w = std::exp(n.log_weight - log_scale_);
    total_ += w;
    for (int t = 0; t < kPathSteps; ++t) {
      mean_(t) += w * n.mean(t);
      square_(t) += w * (n.cov(t, t) + n.mean(t) * n.mean(t));
      for (std::size_t c = 0; c < 2; ++c)
        if (n.off[static_cast<std::size_t>(t)][c]) offset_(t, static_cast<Eigen::Index>(c)) += w;
    }
  }

  const Csv& table_;
  std::size_t first_;
  double log_scale_;
  double total_ = 0.0;
  Eigen::Matrix<double, kPathSteps, 1> mean_ = Eigen::Matrix<double, kPathSteps, 1>::Zero();
  Eigen::Matrix<double, kPathSteps, 1> square_ = Eigen::Matrix<double, kPathSteps, 1>::Zero();
  Eigen::Matrix<double, kPathSteps, 2> offset_ = Eigen::Matrix<double, kPathSteps, 2>::Zero();
};

Model switching_channels() {
  Model model = kalman_model();
  model.options.conditions[static_cast<std::size_t>(Condition::kOffset)] = true;
  model.options.born_faulty = false;
  model.response_s = 1e15;  // walks fall with it: the offset is constant
  model.states = {outside::state("x", 20.0, 1.0, 0.05, {0.0})};
  for (const char* name : {"y1", "y2"}) {
    ChannelModel c = outside::channel(name, 0.2, {1.0});
    c.fails_every_s = 1.0 / (-3.0 * std::log1p(-0.02));
    c.recovers_in_s = 1.0 / -std::log1p(-0.05);
    c.offset_size = 5.0;
    model.channels.push_back(c);
  }
  return model;
}

TEST(Settle, SwitchingOffsetsAreSmoothedAsByEnumeration) {
  const Csv table = Csv::open("offset_exact.csv");
  double worst_mean = 0.0;
  double worst_sd = 0.0;
  double worst_p = 0.0;
  double worst_onset = 0.0;
  for (std::size_t first = 0; first < table.rows(); first += Paths::kPathSteps) {
    const Paths exact(table, first);
    Settled settled(switching_channels(), kForEver);
    for (std::size_t t = 0; t < Paths::kPathSteps; ++t) {
      outside::read(settled.engine, static_cast<TimeNs>(t + 1) * kSecond, 0, table.number(first + t, "y1"));
      outside::read(settled.engine, static_cast<TimeNs>(t + 1) * kSecond, 1, table.number(first + t, "y2"));
    }
    settled.engine.settle_rest();
    ASSERT_EQ(settled.all.size(), std::size_t{Paths::kPathSteps});
    for (int t = 0; t < Paths::kPathSteps; ++t) {
      const Estimate& e = settled.all[static_cast<std::size_t>(t)];
      worst_mean = std::max(worst_mean, std::fabs(e.states[0].mean - exact.mean(t)));
      worst_sd = std::max(worst_sd, relative(e.states[0].sd, std::sqrt(exact.variance(t))));
      for (int c = 0; c < 2; ++c) {
        const double p =
            e.channels[static_cast<std::size_t>(c)].probability[static_cast<std::size_t>(Condition::kOffset)];
        // Merged: an offset that has just begun and one that was thought possible before. The future tells
        // them apart, the merged hypothesis cannot.
        const bool onset = t == 1 && exact.offset(2, c) > 0.9 && exact.offset(1, c) < 0.1;
        (onset ? worst_onset : worst_p) =
            std::max(onset ? worst_onset : worst_p, std::fabs(p - exact.offset(t, c)));
      }
    }
  }
  std::printf("worst: mean %.1e, sd %.2f %%, probability %.1e, before an onset %.1e\n", worst_mean,
              100.0 * worst_sd, worst_p, worst_onset);
  EXPECT_LE(worst_mean, 2e-3);
  EXPECT_LE(worst_sd, 0.01);
  EXPECT_LE(worst_p, 5e-3);
  EXPECT_LE(worst_onset, 0.04);
}

TEST(Settle, JacobisRotationsDiagonalise) {
  Random random(8);
  for (int round = 0; round < 100; ++round) {
    const Eigen::Index n = 1 + round % 8;
    const CoreMatrix a = random_covariance(random, static_cast<int>(n));
    CoreMatrix d = a;
    CoreMatrix v;
    diagonalise(d, v);
    EXPECT_LT((v * d.diagonal().asDiagonal() * v.transpose() - a).norm(), 1e-9 * a.norm());
    EXPECT_LT((v * v.transpose() - CoreMatrix::Identity(n, n)).norm(), 1e-13);
  }
}

// Two ancestors in one dimension, against numerical integration of what each predicted times what came after.
TEST(Settle, AncestorsAreWeighedByWhatTheyPredicted) {
  const Model model = switching_channels();
  const Layout layout(model);
  Random random(9);
  for (int round = 0; round < 200; ++round) {
    const std::array<double, 2> mean{random.normal(), random.normal()};
    const std::array<double, 2> variance{random.between(0.1, 2.0), random.between(0.1, 2.0)};
    const double share = random.between(0.05, 0.95);
    std::array<double, 2> shares{0.3 * share, 0.3 * (1.0 - share)};
    const double b = share * mean[0] + (1.0 - share) * mean[1];
    const double spread =
        share * (variance[0] + square(mean[0] - b)) + (1.0 - share) * (variance[1] + square(mean[1] - b));
    const double after = b + random.normal();
    const double left = spread * random.between(0.05, 0.95);
    std::array<double, 2> integral{};
    for (double x = -15.0; x < 15.0; x += 0.01)
      for (std::size_t i = 0; i < 2; ++i)
        integral[i] += std::exp(-0.5 * (square(x - mean[i]) / variance[i] + square(x - after) / left -
                                        square(x - b) / spread)) /
                       std::sqrt(variance[i]);
    const double expected = shares[0] * integral[0] / (shares[0] * integral[0] + shares[1] * integral[1]);
    std::array<std::array<double, 4>, 2> numbers{};
    std::array<Prospect, 2> group;
    for (std::size_t i = 0; i < 2; ++i) {
      numbers[i] = {mean[i], variance[i], 0.0, 0.0};
      group[i] = Prospect::at(numbers[i].data(), 1);
    }
    Evidence evidence(layout);
    evidence.prepare(group, shares);
    evidence.reweigh(group, &after, &left, 1, shares);
    EXPECT_NEAR(shares[0] / 0.3, expected, 1e-6) << "round " << round;
    EXPECT_NEAR(shares[0] + shares[1], 0.3, 1e-15);
    // Nothing came after: nothing changes.
    shares = {0.3 * share, 0.3 * (1.0 - share)};
    evidence.reweigh(group, &b, &spread, 1, shares);
    EXPECT_NEAR(shares[0], 0.3 * share, 1e-12);
  }
}

}  // namespace
}  // namespace steelyard::engine
