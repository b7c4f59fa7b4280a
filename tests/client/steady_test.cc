// SPDX-License-Identifier: Apache-2.0
// The long run against closed forms: the scalar Riccati equation, Kalata's filter (1984, IEEE Transactions on
// Aerospace and Electronic Systems 20:174), and averages of readings.
#include "cli/steady.h"

#include <gtest/gtest.h>

#include <cmath>
#include <memory>
#include <string>

#include "rig/rig.h"

namespace steelyard::client {
namespace {

using Eigen::MatrixXd;

MatrixXd one(double value) { return MatrixXd::Constant(1, 1, value); }

CovarianceStep many(CovarianceStep step, int doublings) {
  for (int i = 0; i < doublings; ++i) step = together(step, step);
  return step;
}

// P = q/2 + √(q²/4 + q r) before a reading, for a random walk; K = P/(P + r) is P after it over r.
TEST(CovarianceStep, SettlesWhereTheScalarRiccatiEquationSays) {
  for (const double q : {1.0, 0.01, 1e-4, 4.0}) {
    const double r = 1.0;
    const double before = q / 2 + std::sqrt(q * q / 4 + q * r);
    const CovarianceStep run = many(step_of(one(1), one(q), one(1), one(r)), 20);
    EXPECT_NEAR(after(run, one(25.0))(0, 0), before * r / (before + r), 1e-11) << q;
  }
  // A state that fades: P before = φ² P after + q.
  const CovarianceStep fading = many(step_of(one(0.9), one(1), one(1), one(1)), 10);
  EXPECT_NEAR(0.81 * after(fading, one(3.0))(0, 0) + 1.0, 1.48389990267865, 1e-12);
}

// α and β in closed form from the tracking index λ; the covariance after a reading is α, β/T and
// β (α − β/2)/(1 − α)/T² times the reading's variance.
TEST(CovarianceStep, SettlesWhereKalataSays) {
  for (const double index : {0.1, 0.5, 1.0, 2.0, 10.0}) {
    const double rho = (4 + index - std::sqrt(8 * index + index * index)) / 4;
    const double alpha = 1 - rho * rho;
    const double beta = 2 * (2 - alpha) - 4 * std::sqrt(1 - alpha);
    MatrixXd transition(2, 2);
    transition << 1, 1, 0, 1;
    MatrixXd noise(2, 2);
    noise << 0.25, 0.5, 0.5, 1;
    MatrixXd reads(1, 2);
    reads << 1, 0;
    const CovarianceStep run = many(step_of(transition, index * index * noise, reads, one(1)), 12);
    const MatrixXd p = after(run, 100 * MatrixXd::Identity(2, 2));
    EXPECT_NEAR(p(0, 0), alpha, 1e-9) << index;
    EXPECT_NEAR(p(0, 1), beta, 1e-9) << index;
    EXPECT_NEAR(p(1, 1), beta * (alpha - beta / 2) / (1 - alpha), 1e-8) << index;
  }
}

TEST(CovarianceStep, DoublingIsTheSameAsStepByStep) {
  MatrixXd transition(2, 2);
  transition << 1, 0.3, -0.2, 0.9;
  const MatrixXd noise = 0.1 * MatrixXd::Identity(2, 2);
  MatrixXd reads(1, 2);
  reads << 1, 0.5;
  const CovarianceStep step = step_of(transition, noise, reads, one(0.7));
  MatrixXd slow = 5 * MatrixXd::Identity(2, 2);
  for (int i = 0; i < 16; ++i) {
    const MatrixXd before = transition * slow * transition.transpose() + noise;
    const MatrixXd gain = before * reads.transpose() / (reads * before * reads.transpose() + one(0.7))(0, 0);
    slow = before - gain * reads * before;
  }
  EXPECT_LT((after(many(step, 4), 5 * MatrixXd::Identity(2, 2)) - slow).norm(), 1e-12);
}

std::shared_ptr<const rig::Rig> load(const std::string& text) {
  rig::Loaded loaded = rig::load(text, "rig.yaml");
  for (const rig::Problem& problem : loaded.problems) ADD_FAILURE() << problem.text();
  return loaded.rig;
}

Accuracy accuracy(const std::string& text, const std::vector<int>& channels) {
  const auto rig = load(text);
  return LongRun(*rig->model, start_of(*rig->model)).with(channels);
}

std::string walk(const std::string& channels, const std::string& unrest = "0.1") {
  return "rig: walk\nresponse: 10 s\nstates: {x: {unit: m, start: 0, start_sd: 5}}\nunrest: {x: " + unrest +
         "}\nchannels:\n" + channels;
}

double riccati_sd(double q, double r) {
  const double before = q / 2 + std::sqrt(q * q / 4 + q * r);
  return std::sqrt(before * r / (before + r));
}

TEST(LongRun, OneChannelIsTheScalarRiccatiEquation) {
  const std::string text = walk("  a: {reads: x, sd: 0.5, range: [-9, 9], period: 2 s}\n");
  EXPECT_NEAR(accuracy(text, {0}).sd[0], riccati_sd(0.01 * 2, 0.25), 1e-10);
  EXPECT_FALSE(accuracy(text, {0}).growing[0]);
  const std::string unsaid = walk("  a: {reads: x, sd: 0.5, range: [-9, 9], resolution: 0.6}\n");
  EXPECT_NEAR(accuracy(unsaid, {0}).sd[0], riccati_sd(0.01 * 10 / 50, 0.25 + 0.36 / 12), 1e-10)
      << "50 readings a response time";
}

TEST(LongRun, EqualPeriodsAddInformation) {
  const std::string text = walk(
      "  a: {reads: x, sd: 0.5, range: [-9, 9], period: 2 s}\n"
      "  b: {reads: x, sd: 0.25, range: [-9, 9], period: 2 s}\n");
  EXPECT_NEAR(accuracy(text, {0, 1}).sd[0], riccati_sd(0.02, 1 / (1 / 0.25 + 1 / 0.0625)), 1e-10);
  EXPECT_NEAR(accuracy(text, {1}).sd[0], riccati_sd(0.02, 0.0625), 1e-10);
}

// Every sixth reading of a falls together with every fourth of b; by hand, reading by reading.
TEST(LongRun, UnequalPeriodsRunAtTheirOwn) {
  const std::string text = walk(
      "  a: {reads: x, sd: 0.5, range: [-9, 9], period: 2 s}\n"
      "  b: {reads: x, sd: 0.3, range: [-9, 9], period: 6 s}\n");
  double p = 25.0;
  for (int i = 1; i <= 5001; ++i) {
    p += 0.02;
    p = 1 / (1 / p + 1 / 0.25);
    if (i % 3 == 0) p = 1 / (1 / p + 1 / 0.09);
  }
  EXPECT_NEAR(accuracy(text, {0, 1}).sd[0], std::sqrt(p), 1e-9);
}

// 2 s and 5 s: a step of 1 s. What is left out changes no period of the others.
TEST(LongRun, PeriodsThatAreNoMultiplesOfEachOtherAreKept) {
  const std::string text = walk(
      "  a: {reads: x, sd: 0.5, range: [-9, 9], period: 2 s}\n"
      "  b: {reads: x, sd: 0.3, range: [-9, 9], period: 5 s}\n");
  double p = 25.0;
  for (int i = 1; i <= 10010; ++i) {
    p += 0.01;
    if (i % 2 == 0) p = 1 / (1 / p + 1 / 0.25);
    if (i % 5 == 0) p = 1 / (1 / p + 1 / 0.09);
  }
  EXPECT_NEAR(accuracy(text, {0, 1}).sd[0], std::sqrt(p), 1e-9);
  EXPECT_NEAR(accuracy(text, {1}).sd[0], riccati_sd(0.05, 0.09), 1e-10);
}

// 2 s and 2000.3 s meet too rarely: the information of both is spread over time, which is near enough.
TEST(LongRun, PeriodsThatHardlyEverMeetAreSpread) {
  const std::string text = walk(
      "  a: {reads: x, sd: 0.5, range: [-9, 9], period: 2 s}\n"
      "  b: {reads: x, sd: 0.5, range: [-9, 9], period: 2000300 ms}\n");
  EXPECT_NEAR(accuracy(text, {0, 1}).sd[0], riccati_sd(0.02, 0.25), 1e-3);
}

TEST(LongRun, WithoutAnyChannelAWalkGrowsAndAConstantStays) {
  const std::string channel = "  a: {reads: x, sd: 0.5, range: [-9, 9], period: 2 s}\n";
  const Accuracy lost = accuracy(walk(channel), {});
  EXPECT_TRUE(lost.growing[0]);
  EXPECT_GT(lost.sd[0], std::sqrt(25 + 0.01 * 10000));
  const Accuracy constant = accuracy(walk(channel, "0"), {});
  EXPECT_FALSE(constant.growing[0]);
  EXPECT_NEAR(constant.sd[0], 5.0, 1e-12);
}

// A constant, n readings: their mean, n = 1000 responses / 2 s rounded up to a power of two.
TEST(LongRun, AConstantIsTheMeanOfItsReadings) {
  const std::string text = walk("  a: {reads: x, sd: 0.5, range: [-9, 9], period: 2 s}\n", "0");
  EXPECT_NEAR(accuracy(text, {0}).sd[0], std::sqrt(1 / (1 / 25.0 + 8192 / 0.25)), 1e-9);
}

// What is common to a channel's bias and the state cannot be told apart: 1/sd² = 1/5² + 1/bias².
TEST(LongRun, AStandingBiasStays) {
  const std::string text =
      walk("  a: {reads: x, sd: 0.01, range: [-9, 9], period: 2 s, bias_sd: 0.7}\n", "0");
  EXPECT_NEAR(accuracy(text, {0}).sd[0], 1 / std::sqrt(1 / 25.0 + 1 / 0.49), 1e-4);
}

// Averaging n readings whose noise is correlated by ρ from one to the next: variance (1+ρ)/(1−ρ) as large.
TEST(LongRun, CorrelatedNoiseAveragesSlowly) {
  const auto sd = [](const std::string& more) {
    return accuracy(walk("  a: {reads: x, sd: 0.5, range: [-9, 9], period: 2 s" + more + "}\n", "0"), {0})
        .sd[0];
  };
  EXPECT_NEAR(sd(", correlation: 0.6") / sd(""), std::sqrt(1.6 / 0.4), 0.01);
}

// Two parts that read one state with noise of correlation ρ: the best mean has variance r (1 + ρ)/2.
TEST(LongRun, PartsOfAVectorChannelAreReadTogether) {
  const std::string text = walk(
      "  a: {reads: [x, x], sd: [0.5, 0.5], range: [[-9, 9], [-9, 9]], period: 2 s, correlation: [0.4]}\n");
  EXPECT_NEAR(accuracy(text, {0}).sd[0], riccati_sd(0.02, 0.25 * 1.4 / 2), 1e-10);
}

TEST(LongRun, AnUnstableMachineThatNothingShowsIsNotKnown) {
  const std::string text =
      "rig: fall\nresponse: 1 s\nstates: {x: {unit: m, start: 0, start_sd: 1}, y: {unit: m, start: 0, "
      "start_sd: "
      "1}}\nmotion: {x: x}\nchannels: {a: {reads: y, sd: 1, range: [0, 1], period: 1 s}}\n";
  const Accuracy out = accuracy(text, {0});
  EXPECT_TRUE(out.growing[0]);
  EXPECT_FALSE(std::isfinite(out.sd[0]));
}

}  // namespace
}  // namespace steelyard::client
