// SPDX-License-Identifier: Apache-2.0
// The local level of the Nile's yearly flow. Source: Durbin & Koopman 2012, Time Series Analysis by State
// Space Methods, 2nd ed., chapter 2; readings: Cobb 1978. Expected values were computed with statsmodels
// 0.13.5 and the book's own recursions at the published variances 15099 and 1469.1 (those two from memory of
// the book). One second stands for a year.
#include <gtest/gtest.h>

#include "outside/csv.h"
#include "outside/machines.h"

namespace steelyard::outside {
namespace {

constexpr double kNoise = 15099.0;
constexpr double kUnrest = 1469.1;

engine::Engine nile(double start, double variance) {
  engine::Model model = kalman_model();
  model.states = {state("flow", start, std::sqrt(variance), std::sqrt(kUnrest), {0.0})};
  model.channels = {channel("gauge", std::sqrt(kNoise), {1.0})};
  return outside::start(model);
}

// With an unknown start the posterior after the first reading is N(y1, noise), a year later N(y1, noise +
// unrest). Starting there compares the published diffuse filter without the digits that a start variance of
// 1e7 noise variances would cost.
engine::Engine after_first_year(const Csv& table) { return nile(table.number(0, "y"), kNoise + kUnrest); }

double variance(const engine::Estimate& e) { return e.states[0].sd * e.states[0].sd; }

TEST(Nile, FilteredMeansAndVariancesAreThePublishedOnes) {
  const Csv table = Csv::open("nile_filter.csv");
  engine::Engine engine = after_first_year(table);
  for (std::size_t i = 1; i < table.rows(); ++i) {
    const auto t = static_cast<engine::TimeNs>(i + 1) * kSecond;
    read(engine, t, 0, table.number(i, "y"));
    const auto e = estimate(engine, t);
    EXPECT_LT(relative(e.states[0].mean, table.number(i, "a_filt")), 1e-9) << "t = " << i + 1;
    EXPECT_LT(relative(variance(e), table.number(i, "P_filt")), 1e-9) << "t = " << i + 1;
    if (i == 1) {
      EXPECT_LT(relative(e.states[0].mean, 1140.927839934822), 1e-9);
      EXPECT_LT(relative(variance(e), 7899.7363793969), 1e-9);
    }
    if (i == 9) {
      EXPECT_LT(relative(e.states[0].mean, 1162.9026154566), 1e-9);
      EXPECT_LT(relative(variance(e), 4051.2841772235), 1e-9);
    }
    if (i == 99) {
      EXPECT_LT(relative(e.states[0].mean, 798.3702926083578), 1e-9);
      EXPECT_LT(relative(variance(e), 4032.157941808784), 1e-9);
    }
  }
  EXPECT_LT(relative(engine.log_evidence(), -632.5456251156736), 1e-9);
}

TEST(Nile, PredictionIsThePublishedOne) {
  const Csv table = Csv::open("nile_filter.csv");
  engine::Engine engine = after_first_year(table);
  for (std::size_t i = 1; i + 1 < table.rows(); ++i) {
    const auto t = static_cast<engine::TimeNs>(i + 1) * kSecond;
    read(engine, t, 0, table.number(i, "y"));
    const auto e = estimate(engine, t + kSecond);
    EXPECT_LT(relative(e.states[0].mean, table.number(i + 1, "a_pred")), 1e-9) << "t = " << i + 2;
    EXPECT_LT(relative(variance(e), table.number(i + 1, "P_pred")), 1e-9) << "t = " << i + 2;
  }
}

TEST(Nile, KnownStartGivesThePublishedEvidence) {
  const Csv table = Csv::open("nile_filter.csv");
  engine::Engine engine = nile(0.0, 1e7);
  for (std::size_t i = 0; i < table.rows(); ++i) {
    const auto t = static_cast<engine::TimeNs>(i + 1) * kSecond;
    read(engine, t, 0, table.number(i, "y"));
    if (i > 0) continue;
    const auto e = estimate(engine, t);
    EXPECT_LT(relative(e.states[0].mean, 1118.3114615242446), 1e-9);
    EXPECT_LT(relative(variance(e), 15076.236390674487), 1e-9);
  }
  EXPECT_LT(relative(engine.log_evidence(), -641.5855784594156), 1e-9);
}

TEST(Nile, SteadyGainIsThePublishedOne) {
  const Csv table = Csv::open("nile_filter.csv");
  engine::Engine engine = after_first_year(table);
  for (std::size_t i = 1; i < 99; ++i)
    read(engine, static_cast<engine::TimeNs>(i + 1) * kSecond, 0, table.number(i, "y"));
  const auto before = estimate(engine, 100 * kSecond);
  read(engine, 100 * kSecond, 0, before.states[0].mean + 100.0);
  const auto after = estimate(engine, 100 * kSecond);
  EXPECT_LT(relative(variance(before), 5501.257941808476), 1e-9);
  EXPECT_LT(relative((after.states[0].mean - before.states[0].mean) / 100.0, 0.2670480125709303), 1e-9);
}

// Durbin & Koopman s. 2.7: years 21–40 and 61–80 are taken out.
TEST(Nile, MissingStretchesAreBridgedAsPublished) {
  const Csv table = Csv::open("nile_filter.csv");
  const Csv missing = Csv::open("nile_missing.csv");
  engine::Engine engine = after_first_year(table);
  for (std::size_t i = 1; i < table.rows(); ++i) {
    const auto year = static_cast<engine::TimeNs>(i + 1);
    const bool lost = (year >= 21 && year <= 40) || (year >= 61 && year <= 80);
    if (!lost) read(engine, year * kSecond, 0, table.number(i, "y"));
    const auto e = estimate(engine, year * kSecond);
    EXPECT_LT(relative(e.states[0].mean, missing.number(i, "a_filt")), 1e-9) << "t = " << year;
    EXPECT_LT(relative(variance(e), missing.number(i, "P_filt")), 1e-9) << "t = " << year;
  }
  // The published figure counts the first, diffuse reading as −log(2π)/2.
  EXPECT_LT(relative(engine.log_evidence() - 0.5 * std::log(2.0 * M_PI), -381.5060013085083), 1e-9);
}

}  // namespace
}  // namespace steelyard::outside
