// SPDX-License-Identifier: Apache-2.0
// Facts of the trade: common practice without a source, on the suite's positioning axis.
#include <gtest/gtest.h>

#include <algorithm>
#include <cstdio>

#include "outside/machines.h"
#include "suite/trolley.h"

namespace steelyard::outside {
namespace {

using suite::Kind;
using suite::Row;

constexpr std::uint64_t kSeeds = 5;
const std::vector<bool> kAll{true, true, true, true};

struct Run {
  suite::Positions track;
  double least_trust = 1.0;
};

engine::TimeNs time_of(int step) { return kSecond + step * (kSecond / 50); }

Run run(const std::shared_ptr<const engine::Model>& model, const Row& row, const suite::Readings& readings) {
  engine::Engine machine(model);
  engine::Estimate e;
  Run out;
  for (int i = 0; i < suite::kSteps; ++i) {
    int number = 0;
    for (std::size_t j = 0; j < suite::kChannels; ++j) {
      if (!row.present[j]) continue;
      machine.read(time_of(i), number++, readings.value[j][static_cast<std::size_t>(i)],
                   engine::Quality::kGood);
    }
    machine.estimate(time_of(i), engine::Detail::kBrief, e);
    out.track.position.push_back(e.states[0].mean);
    out.track.sd.push_back(e.states[0].sd);
    for (const auto& c : e.channels) out.least_trust = std::min(out.least_trust, c.trust);
  }
  return out;
}

TEST(Trade, SetPointChangeBringsNoTrustUnderHalf) {
  const Row none{"none", {}, kAll, true};
  for (std::uint64_t seed = 1; seed <= kSeeds; ++seed) {
    const auto readings = suite::read(suite::simulate(seed), none, seed);
    const double least = run(suite::axis_model({}, none), none, readings).least_trust;
    std::printf("seed %d: least trust %.3f\n", static_cast<int>(seed), least);
    EXPECT_GE(least, 0.5) << "seed " << seed;
  }
}

struct Hurt {
  double fixed = 0.0;   // RMSE of the filter that does not know of the fault, m
  double engine = 0.0;  // RMSE of the engine, m
  double told = 0.0;    // RMSE of the filter that leaves the channel out, m
};

Hurt hurt_by(const Row& row) {
  Hurt sum;
  for (std::uint64_t seed = 1; seed <= kSeeds; ++seed) {
    const auto truth = suite::simulate(seed);
    const auto readings = suite::read(truth, row, seed);
    sum.fixed += suite::rmse(reference(readings, row, false).position, truth) / kSeeds;
    sum.told += suite::rmse(reference(readings, row, true).position, truth) / kSeeds;
    sum.engine += suite::rmse(run(suite::axis_model({}, row), row, readings).track.position, truth) / kSeeds;
  }
  std::printf("%s: fixed %.4f m, engine %.4f m, told %.4f m\n", row.name.c_str(), sum.fixed, sum.engine,
              sum.told);
  return sum;
}

// Position sensors a (sd 0.01 m) and b (0.03 m), and the speed sensor to judge between them.
void expect_both_handled_alike(double a_sds, double b_sds) {
  const std::vector<bool> kTwo{true, true, false, true};
  const Hurt a = hurt_by({"offset on a", {{0, Kind::kOffset, a_sds}}, kTwo, true});
  const Hurt b = hurt_by({"offset on b", {{1, Kind::kOffset, b_sds}}, kTwo, true});
  EXPECT_GT(a.fixed, 2.0 * b.fixed);
  // Handled alike: neither fault costs the engine more than leaving the channel out would.
  EXPECT_LT(a.engine, 1.1 * a.told);
  EXPECT_LT(b.engine, 1.1 * b.told);
}

TEST(Trade, SameOffsetInMetresHurtsOnlyTheFixedFilterMoreOnThePreciseSensor) {
  expect_both_handled_alike(60.0, 20.0);
}

TEST(Trade, SameOffsetInOwnSdsHurtsOnlyTheFixedFilterMoreOnThePreciseSensor) {
  expect_both_handled_alike(20.0, 20.0);
}

TEST(Trade, LearningThePrecisionsCostsCertainty) {
  const Row none{"none", {}, kAll, true};
  auto model = suite::axis_model({}, none);
  model->jolt.on = false;
  model->still.on = false;
  for (std::uint64_t seed = 1; seed <= kSeeds; ++seed) {
    const auto readings = suite::read(suite::simulate(seed), none, seed);
    const auto fixed = suite::reference(readings, none, false, model->states[1].unrest);
    const auto ours = run(model, none, readings).track;
    double least = 10.0;
    for (std::size_t i = 0; i < ours.sd.size(); ++i) least = std::min(least, ours.sd[i] / fixed.sd[i]);
    std::printf("seed %d: stated sd at least %.3f of the fixed filter's\n", static_cast<int>(seed), least);
    EXPECT_GE(least, 0.98) << "seed " << seed;
  }
}

}  // namespace
}  // namespace steelyard::outside
