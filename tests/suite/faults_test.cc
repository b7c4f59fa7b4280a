// SPDX-License-Identifier: Apache-2.0
// Do faults and traits do to readings what their names say? And do bounds complain?
#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>

#include "suite/bounds.h"
#include "suite/faults.h"
#include "suite/rows.h"

namespace steelyard::suite {
namespace {

constexpr std::uint64_t kSeed = 3;

class Trolley : public ::testing::Test {
 protected:
  const Machine& m = machine("trolley");
  const Truth truth = m.simulate(kSeed, false);
  [[nodiscard]] Readings readings(const Row& row) const {
    return read(m, truth, resolved(m, row, truth), kSeed);
  }
  [[nodiscard]] Readings readings(const Fault& fault) const { return readings(make_row("", {fault})); }
  [[nodiscard]] std::size_t step(double t_s) const {
    return static_cast<std::size_t>(std::lround(t_s / m.step_s));
  }
  [[nodiscard]] double error(const Readings& r, double t_s) const {
    return r.value[0][step(t_s)] - truth.state[step(t_s)][0];
  }
};

TEST_F(Trolley, SameSeedGivesSameReadings) {
  const Fault fault{0, Kind::kGarbage};
  EXPECT_EQ(readings(fault).value[0], readings(fault).value[0]);
}

TEST_F(Trolley, FaultsKeepToTheirTimes) {
  const Readings well = readings(Row{});
  const Readings ill = readings({0, Kind::kOffset, 20});
  for (std::size_t i = 0; i < step(60.0); ++i) {
    const double added = ill.value[0][i] - well.value[0][i];
    EXPECT_NEAR(added, i >= step(20.0) && i < step(40.0) ? 0.2 : 0.0, 1e-9) << "step " << i;
  }
  EXPECT_EQ(ill.value[1], well.value[1]);
}

TEST_F(Trolley, DriftAndLagGrowAsTheirLawsSay) {
  EXPECT_NEAR(error(readings({0, Kind::kDrift, 5}), 30.0), 0.5, 0.06);
  const Readings lag = readings({0, Kind::kLag, 2});
  double lagged = truth.state[step(20.0) - 1][0];
  for (std::size_t i = step(20.0); i <= step(30.0); ++i)
    lagged += (truth.state[i][0] - lagged) * (1.0 - std::exp(-0.02 / 2.0));
  EXPECT_NEAR(lag.value[0][step(30.0)], lagged, 0.06);
}

TEST_F(Trolley, FrozenRepeatsAndAHoldJittersByTwoCounts) {
  const Readings frozen = readings({0, Kind::kFrozen});
  const Readings hold = readings({0, Kind::kHold});
  double widest = 0.0;
  for (std::size_t i = step(20.0); i < step(40.0); ++i) {
    EXPECT_EQ(frozen.value[0][i], frozen.value[0][step(20.0)]);
    widest = std::max(widest, std::fabs(hold.value[0][i] - frozen.value[0][i]));
  }
  EXPECT_NEAR(widest, 2e-4, 1e-9);
}

TEST_F(Trolley, ADeadbandSendsWhatHasMovedByIt) {
  Row row;
  row.traits = {{0, &Channel::deadband, 0.04}};
  const Readings r = readings(row);
  double last = NAN;
  int sent = 0;
  for (std::size_t i = 0; i < r.value[0].size(); ++i) {
    if (r.note[0][i] == Note::kQuiet) {
      EXPECT_TRUE(std::isnan(r.value[0][i]));
      continue;
    }
    ASSERT_EQ(r.note[0][i], Note::kFresh);
    if (sent > 0) {
      EXPECT_GE(std::fabs(r.value[0][i] - last), 0.04 - 1e-9);
    }
    last = r.value[0][i];
    ++sent;
  }
  EXPECT_GT(sent, 50);
  EXPECT_LT(sent, 1500);
}

TEST_F(Trolley, DampedNoiseHasTheChannelsSdAndIsCorrelated) {
  Row row;
  row.at_rest = true;
  row.traits = {{1, &Channel::damping_s, 0.2}};
  const Truth rest = m.simulate(kSeed, true);
  const Readings r = read(m, rest, row, kSeed);
  double squares = 0.0;
  double products = 0.0;
  for (std::size_t i = 1; i < r.value[1].size(); ++i) {
    squares += r.value[1][i] * r.value[1][i];
    products += r.value[1][i] * r.value[1][i - 1];
  }
  const double n = static_cast<double>(r.value[1].size() - 1);
  EXPECT_NEAR(std::sqrt(squares / n), 0.03, 0.1 * 0.03) << "seed " << kSeed;
  EXPECT_NEAR(products / squares, std::exp(-0.1), 0.03) << "seed " << kSeed;
}

TEST_F(Trolley, FaultsAtASetPointChangeBeginThere) {
  Row row = make_row("", {{0, Kind::kFrozen}});
  row.at_change = true;
  const double from_s = resolved(m, row, truth).faults[0].from_s;
  bool found = false;
  for (const double change_s : truth.changes_s) found = found || std::fabs(from_s - change_s - 0.3) < 1e-9;
  EXPECT_TRUE(found) << from_s;
  EXPECT_GE(from_s, m.fault_from_s);
}

TEST(Rows, NamesAreUniqueAndThereAreAHundred) {
  std::size_t count = 0;
  for (const Machine& m : machines()) {
    std::vector<std::string> names;
    for (const Row& row : m.rows) names.push_back(row.name);
    std::sort(names.begin(), names.end());
    EXPECT_EQ(std::adjacent_find(names.begin(), names.end()), names.end()) << m.name;
    count += names.size();
  }
  EXPECT_GE(count, 100U);
}

TEST(Rows, EveryMachinesModelIsOneThatTheEngineRuns) {
  for (const Machine& m : machines())
    for (const Row& row : m.rows) EXPECT_EQ(declare(m, row, {})->problem(), "") << m.name << ": " << row.name;
}

TEST(Bounds, WhatIsNoNumberBreaksThem) {
  const Row row = make_row("", {{0, Kind::kFrozen}});
  Result r;
  r.row = &row;
  r.told_coverage = 0.95;
  r.coverage = 0.95;
  r.to_told = 1.0;
  r.mid_trust = 0.1;
  EXPECT_TRUE(breaches(r).empty()) << breaches(r)[0];
  r.to_told = NAN;
  r.coverage = NAN;
  EXPECT_EQ(breaches(r).size(), 3U);
}

TEST(Bounds, ClassesHaveTheirOwn) {
  EXPECT_EQ(make_row("", {{0, Kind::kDrift, 0.3}}).what, Class::kCreep);
  EXPECT_EQ(make_row("", {{0, Kind::kDrift, 1.0}}).what, Class::kSingle);
  EXPECT_EQ(error_bound(Class::kCreep), 1.6);
  EXPECT_EQ(error_bound(Class::kSingle), 1.2);
  EXPECT_EQ(error_bound(Class::kPair), 1.4);
  EXPECT_FALSE(std::isfinite(error_bound(Class::kAmbiguous)));
}

}  // namespace
}  // namespace steelyard::suite
