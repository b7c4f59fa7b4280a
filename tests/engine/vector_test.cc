// SPDX-License-Identifier: Apache-2.0
// Vector channels against dense formulas and against the scalar channels that they are made of.
#include <gtest/gtest.h>

#include "engine/cases.h"
#include "engine/engine.h"
#include "suite/random.h"

namespace steelyard::engine {
namespace {

using Eigen::MatrixXd;
using Eigen::VectorXd;

AffineForm reads(std::vector<double> on_states) { return {std::move(on_states), {}, 0.0}; }

PartModel part(std::vector<double> on_states, double sd) {
  PartModel p;
  p.reads = reads(std::move(on_states));
  p.sd = sd;
  p.lo = -100.0;
  p.hi = 100.0;
  p.resolution = 1e-4;
  return p;
}

/// Two places that walk at random, read by a fix of both, or by two channels of one number each.
std::shared_ptr<Model> plane(bool vector, double correlation = 0.0) {
  auto model = std::make_shared<Model>();
  model->states = {{"east", "m", 0.0, 1.0, 0.1, {}, reads({0, 0})},
                   {"north", "m", 0.0, 1.0, 0.1, {}, reads({0, 0})}};
  ChannelModel first;
  static_cast<PartModel&>(first) = part({1, 0}, 0.1);
  first.name = "fix";
  if (vector) {
    first.others.push_back(part({0, 1}, 0.2));
    if (correlation != 0.0) first.part_correlation = {correlation};
    model->channels = {first};
  } else {
    ChannelModel second;
    static_cast<PartModel&>(second) = part({0, 1}, 0.2);
    second.name = "other";
    model->channels = {first, second};
  }
  set_defaults(*model, 1.0);
  return model;
}

void only_gaussian(Model& model) {
  model.jolt.on = model.still.on = false;
  model.options.learn_precision = false;
  model.options.use_repeats = false;
  model.options.conditions = {true, false, false, false, false, false};
  for (auto& c : model.channels) c.strays = 0.0;
}

TEST(Vector, WithoutConditionsItsPartsAreAsTwoScalarChannels) {
  auto vector = plane(true);
  auto scalars = plane(false);
  only_gaussian(*vector);
  only_gaussian(*scalars);
  Engine a(vector);
  Engine b(scalars);
  suite::Random random(3);
  Estimate ea;
  Estimate eb;
  for (int i = 0; i < 200; ++i) {
    const TimeNs t = i * 100'000'000LL;
    const std::array y{random.normal(), random.normal()};
    a.read(t, 0, y, Quality::kGood);
    b.read(t, 0, y[0], Quality::kGood);
    b.read(t, 1, y[1], Quality::kGood);
  }
  a.estimate(a.time(), Detail::kFull, ea);
  b.estimate(b.time(), Detail::kFull, eb);
  for (std::size_t i = 0; i < 2; ++i) {
    EXPECT_NEAR(ea.states[i].mean, eb.states[i].mean, 1e-12);
    EXPECT_NEAR(ea.states[i].sd, eb.states[i].sd, 1e-12);
  }
  EXPECT_NEAR(a.log_evidence(), b.log_evidence(), 1e-9);
}

// Against the dense Kalman update with the correlated noise's covariance.
TEST(Vector, CorrelatedPartsFollowTheDenseUpdate) {
  auto model = plane(true, 0.7);
  only_gaussian(*model);
  Engine engine(model);
  suite::Random random(4);
  VectorXd mean = VectorXd::Zero(2);
  MatrixXd cov = MatrixXd::Identity(2, 2);
  MatrixXd noise(2, 2);
  const double q = 1e-8 / 12.0;
  const double s1 = std::sqrt(0.01 + q);
  const double s2 = std::sqrt(0.04 + q);
  noise << s1 * s1, 0.7 * s1 * s2, 0.7 * s1 * s2, s2 * s2;
  for (int i = 0; i < 50; ++i) {
    if (i > 0) cov += 0.01 * 0.1 * MatrixXd::Identity(2, 2);
    VectorXd y(2);
    y << random.normal(), random.normal();
    const MatrixXd gain = cov * (cov + noise).inverse();
    mean += gain * (y - mean);
    cov = (cov - gain * cov).eval();
    engine.read(i * 100'000'000LL, 0, std::span<const double>(y.data(), 2), Quality::kGood);
  }
  Estimate e;
  engine.estimate(engine.time(), Detail::kFull, e);
  for (int i = 0; i < 2; ++i) {
    EXPECT_NEAR(e.states[static_cast<std::size_t>(i)].mean, mean(i), 1e-12);
    EXPECT_NEAR(e.states[static_cast<std::size_t>(i)].sd, std::sqrt(cov(i, i)), 1e-12);
  }
}

struct Fix {
  double east = 0.0;
  double north = 0.0;
};

/// Drives a plane with a second, independent fix through a fault of the first one's north part.
Estimate after_fault(double offset, double noise_factor, bool frozen = false) {
  auto model = plane(true);
  for (const char* name : {"other", "third"}) {
    model->channels.push_back(model->channels[0]);
    model->channels.back().name = name;
  }
  Engine engine(model);
  suite::Random random(5);
  Fix truth;
  std::array<double, 2> held{};
  Estimate e;
  for (int i = 0; i < 400; ++i) {
    const TimeNs t = i * 50'000'000LL;
    truth.east += 0.02 * random.normal();
    truth.north += 0.02 * random.normal();
    const bool bad = i >= 200;
    for (int j = 0; j < 3; ++j) {
      const bool hit = bad && j == 0;
      std::array<double, 2> y{
          truth.east + 0.1 * random.normal() * (hit ? noise_factor : 1.0),
          truth.north + 0.2 * random.normal() * (hit ? noise_factor : 1.0) + (hit ? offset : 0.0)};
      for (double& v : y) v = std::round(v * 1e4) / 1e4;
      if (hit && frozen) y = held;
      if (j == 0 && !bad) held = y;
      engine.read(t, j, y, Quality::kGood);
    }
  }
  engine.estimate(engine.time(), Detail::kFull, e);
  EXPECT_NEAR(e.states[0].mean, truth.east, 0.15);
  EXPECT_NEAR(e.states[1].mean, truth.north, 0.3);
  return e;
}

TEST(Vector, AnOffsetOfOnePartIsFoundWithItsSize) {
  const Estimate e = after_fault(4.0, 1.0);
  EXPECT_LT(e.channels[0].trust, 0.05);
  EXPECT_NEAR(e.channels[0].offset, 0.0, 0.3);
  ASSERT_EQ(e.channels[0].others.size(), 1U);
  EXPECT_NEAR(e.channels[0].others[0].offset, 4.0, 0.4);
  EXPECT_GT(e.channels[1].trust, 0.5);
  ASSERT_EQ(e.explanations[0].findings.size(), 2U);
  EXPECT_EQ(e.explanations[0].findings[1].part, 1);
  EXPECT_NEAR(static_cast<double>(e.explanations[0].findings[1].since_ns) * 1e-9, 10.0, 1.0);
}

TEST(Vector, GrownNoiseIsLearnedInBothParts) {
  const Estimate e = after_fault(0.0, 10.0);
  for (double p : e.channels[0].probability) {
    printf("%g ", p);
  }
  printf("trust %g\n", e.channels[0].trust);
  EXPECT_LT(e.channels[0].trust, 0.1);
  EXPECT_NEAR(e.channels[0].noise_sd, 1.0, 0.35);
  EXPECT_NEAR(e.channels[0].others[0].noise_sd, 2.0, 0.7);
  EXPECT_GT(e.channels[1].trust, 0.5);
}

TEST(Vector, AFreezeIsAFreezeOfAllParts) {
  const Estimate e = after_fault(0.0, 1.0, true);
  EXPECT_GT(e.channels[0].probability[static_cast<std::size_t>(Condition::kFrozen)], 0.95);
}

}  // namespace
}  // namespace steelyard::engine
