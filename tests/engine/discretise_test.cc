// SPDX-License-Identifier: Apache-2.0
// Discretisation against many small Runge–Kutta steps of the moment equations.
#include "engine/discretise.h"

#include <gtest/gtest.h>

#include <Eigen/Dense>

#include "suite/random.h"

namespace steelyard::engine {
namespace {

using Eigen::MatrixXd;
using Eigen::VectorXd;

struct Dense {
  MatrixXd transition;
  VectorXd shift;
  MatrixXd noise;
};

Dense slope(const LinearSystem& s, const Dense& x) {
  const MatrixXd m = s.rate;
  const MatrixXd d = VectorXd(s.density).asDiagonal();
  return {m * x.transition, m * x.shift + VectorXd(s.drive), m * x.noise + x.noise * m.transpose() + d};
}

Dense plus(const Dense& x, double h, const Dense& k) {
  return {x.transition + h * k.transition, x.shift + h * k.shift, x.noise + h * k.noise};
}

Dense by_small_steps(const LinearSystem& s, double dt, int steps) {
  const auto n = s.rate.rows();
  Dense x{MatrixXd::Identity(n, n), VectorXd::Zero(n), MatrixXd::Zero(n, n)};
  const double h = dt / steps;
  for (int i = 0; i < steps; ++i) {
    const Dense k1 = slope(s, x);
    const Dense k2 = slope(s, plus(x, 0.5 * h, k1));
    const Dense k3 = slope(s, plus(x, 0.5 * h, k2));
    const Dense k4 = slope(s, plus(x, h, k3));
    x = plus(plus(plus(plus(x, h / 6, k1), h / 3, k2), h / 3, k3), h / 6, k4);
  }
  return x;
}

LinearSystem random_system(suite::Random& random, int n) {
  LinearSystem s{CoreMatrix(n, n), CoreVector(n), CoreVector(n)};
  for (int i = 0; i < n; ++i) {
    s.drive(i) = random.normal();
    s.density(i) = random.uniform();
    for (int k = 0; k < n; ++k) s.rate(i, k) = random.normal();
  }
  return s;
}

double difference(const Transition& a, const Dense& b) {
  const double scale = 1.0 + b.transition.norm() + b.shift.norm() + b.noise.norm();
  return ((MatrixXd(a.transition) - b.transition).norm() + (VectorXd(a.shift) - b.shift).norm() +
          (MatrixXd(a.noise) - b.noise).norm()) /
         scale;
}

TEST(Discretise, AgreesWithManySmallSteps) {
  constexpr std::uint64_t kSeed = 3;
  suite::Random random(kSeed);
  for (int i = 0; i < 20; ++i) {
    const int n = 1 + i % 5;
    const LinearSystem s = random_system(random, n);
    for (const double dt : {0.01, 0.3, 2.0}) {
      Transition move;
      discretise(s, dt, move);
      EXPECT_LT(difference(move, by_small_steps(s, dt, 4000)), 1e-11)
          << "seed " << kSeed << ", case " << i << ", dt " << dt;
    }
  }
}

TEST(Discretise, TwoGapsMakeOne) {
  constexpr std::uint64_t kSeed = 4;
  suite::Random random(kSeed);
  for (int i = 0; i < 50; ++i) {
    const LinearSystem s = random_system(random, 1 + i % 6);
    Transition a;
    Transition b;
    Transition both;
    discretise(s, 0.37, a);
    discretise(s, 1.1, b);
    discretise(s, 1.47, both);
    const MatrixXd f = b.transition;
    const Dense composed{f * MatrixXd(a.transition), f * VectorXd(a.shift) + VectorXd(b.shift),
                         f * MatrixXd(a.noise) * f.transpose() + MatrixXd(b.noise)};
    EXPECT_LT(difference(both, composed), 1e-12) << "seed " << kSeed << ", case " << i;
  }
}

TEST(Discretise, NoGapMovesNothing) {
  suite::Random random(5);
  Transition move;
  discretise(random_system(random, 3), 0.0, move);
  EXPECT_EQ(MatrixXd(move.transition), MatrixXd::Identity(3, 3));
  EXPECT_EQ(move.shift.norm(), 0.0);
  EXPECT_EQ(move.noise.norm(), 0.0);
}

// A pole of 1 ms over 30 days: the block exponential with the negated matrix would overflow.
TEST(Discretise, StiffSystemSettlesOverALongGap) {
  LinearSystem s{CoreMatrix(1, 1), CoreVector(1), CoreVector(1)};
  s.rate(0, 0) = -1e3;
  s.drive(0) = 5e3;
  s.density(0) = 4e3;
  Transition move;
  discretise(s, 30 * 86400.0, move);
  EXPECT_NEAR(move.transition(0, 0), 0.0, 1e-12);
  EXPECT_NEAR(move.shift(0), 5.0, 1e-9);
  EXPECT_NEAR(move.noise(0, 0), 2.0, 1e-9);
}

}  // namespace
}  // namespace steelyard::engine
