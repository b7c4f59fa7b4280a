// SPDX-License-Identifier: Apache-2.0
// Channels that switch between sound and offset, against exact enumeration of all 4^8 condition paths.
// Source: readings invented; enumeration computed with numpy 1.24.2.
//
// The model there: x1 ~ N(20, 1), steps N(0, 0.05²), noise sd 0.2; before each step but the first a sound
// channel gets an offset with probability 0.02, o ~ N(0, 5²), and an offset one recovers with 0.05.
#include <gtest/gtest.h>

#include <cstdio>

#include "outside/csv.h"
#include "outside/machines.h"

namespace steelyard::outside {
namespace {

engine::Engine two_switching_channels() {
  engine::Model model = kalman_model();
  const auto offset = static_cast<std::size_t>(engine::Condition::kOffset);
  model.options.conditions[offset] = true;
  model.options.born_faulty = false;
  // The offset there is constant: walk speeds fall with the response time. Nothing else here depends on it.
  model.response_s = 1e15;
  model.states = {state("x", 20.0, 1.0, 0.05, {0.0})};
  for (const char* name : {"y1", "y2"}) {
    engine::ChannelModel c = channel(name, 0.2, {1.0});
    // Per step of a second: 1 − exp(−rate) = 0.02 and 0.05; a condition is born at 1/(3·fails_every).
    c.fails_every_s = 1.0 / (-3.0 * std::log1p(-0.02));
    c.recovers_in_s = 1.0 / -std::log1p(-0.05);
    c.offset_size = 5.0;
    model.channels.push_back(c);
  }
  return start(model);
}

struct Worst {
  double mean = 0.0, variance = 0.0, p = 0.0, offset = 0.0, evidence = 0.0;
};

void compare(engine::Engine& engine, engine::TimeNs t, const Csv& exact, std::size_t row, Worst& worst) {
  SCOPED_TRACE("scenario " + exact.text(row, "scenario") + ", t = " + exact.text(row, "t"));
  const auto e = estimate(engine, t);
  const auto offset = static_cast<std::size_t>(engine::Condition::kOffset);
  const double mean = std::fabs(e.states[0].mean - exact.number(row, "mean"));
  const double variance = relative(std::pow(e.states[0].sd, 2), exact.number(row, "var"));
  const double p1 = std::fabs(e.channels[0].probability[offset] - exact.number(row, "p_offset1"));
  const double p2 = std::fabs(e.channels[1].probability[offset] - exact.number(row, "p_offset2"));
  EXPECT_LE(mean, 2e-3);
  EXPECT_LE(variance, 0.02);
  EXPECT_LE(p1, 2e-3);
  EXPECT_LE(p2, 2e-3);
  worst.mean = std::max(worst.mean, mean);
  worst.variance = std::max(worst.variance, variance);
  worst.p = std::max({worst.p, p1, p2});
  worst.evidence =
      std::max(worst.evidence, std::fabs(engine.log_evidence() - exact.number(row, "log_evidence")));
  if (exact.number(row, "p_offset2") > 0.5)
    worst.offset = std::max(worst.offset, std::fabs(e.channels[1].offset - exact.number(row, "offset2")));
}

TEST(SwitchingOffsets, MomentsAndProbabilitiesAreTheExactOnes) {
  const Csv exact = Csv::open("offset_exact.csv");
  ASSERT_EQ(exact.rows(), 32U);
  Worst worst;
  engine::Engine engine = two_switching_channels();
  for (std::size_t row = 0; row < exact.rows(); ++row) {
    if (exact.number(row, "t") == 1.0) engine = two_switching_channels();
    const auto t = static_cast<engine::TimeNs>(exact.number(row, "t")) * kSecond;
    read(engine, t, 0, exact.number(row, "y1"));
    read(engine, t, 1, exact.number(row, "y2"));
    compare(engine, t, exact, row, worst);
  }
  std::printf("worst: mean %.1e, variance %.2f %%, probability %.1e, offset %.1e, log evidence %.1e\n",
              worst.mean, 100.0 * worst.variance, worst.p, worst.offset, worst.evidence);
}

}  // namespace
}  // namespace steelyard::outside
