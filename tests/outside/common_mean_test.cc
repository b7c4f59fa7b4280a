// SPDX-License-Identifier: Apache-2.0
// One quantity measured by several series of unknown precision: gravity at Washington (8 series, 81 readings)
// and the speed of light by Michelson (5 series of 20), against the exact posterior. Sources: see
// data/README.md.
//
// The engine's prior of a precision is Gamma(a0, a0) relative to the datasheet's 1/sd², so Gamma(a, b) there
// is prior_readings = 2a and sd = √(b/a) here, with the cap, forgetting, strays, conditions and modes off;
// the common mean is a state without unrest, N(0, s²) as there. Gamma(2, 200) becomes sd 10 worth 4 readings,
// Gamma(2, 1e4) sd 70.7. Gamma(0.001, 0.001) would be worth 0.002 readings: the engine demands more than 2,
// so it is left out.
//
// The engine takes one reading after another and cannot go back, so the order matters; orders are shuffled.
#include <gtest/gtest.h>

#include <cstdio>
#include <numeric>
#include <random>

#include "outside/csv.h"
#include "outside/machines.h"

namespace steelyard::outside {
namespace {

struct Reading {
  int series = 0;
  double value = 0.0;
};

struct Problem {
  std::vector<Reading> readings;
  int series = 0;
  double prior_sd = 0.0;  ///< of the common mean
  double sheet_sd = 0.0;  ///< √(b/a)
  double mean = 0.0;      ///< exact posterior of the common mean
  double sd = 0.0;
  std::vector<double> precision;
};

constexpr double kPriorReadings = 4.0;

std::vector<Reading> readings(const Csv& table, const char* series, const char* value) {
  std::vector<Reading> out;
  for (std::size_t i = 0; i < table.rows(); ++i)
    out.push_back({static_cast<int>(table.number(i, series)) - 1, table.number(i, value)});
  return out;
}

double exact(const Csv& table, const std::string& quantity, const std::string& prior = {}) {
  for (std::size_t i = 0; i < table.rows(); ++i)
    if (table.text(i, "quantity") == quantity && (prior.empty() || table.text(i, "prior") == prior))
      return table.number(i, "value");
  throw std::runtime_error("no value of " + quantity);
}

Problem gravity() {
  const Csv table = Csv::open("gravity_exact.csv");
  Problem p{readings(Csv::open("gravity.csv"), "series", "g"), 8, 1e3, 10.0, 0.0, 0.0, {}};
  p.mean = exact(table, "mu_mean");
  p.sd = exact(table, "mu_sd");
  for (int k = 1; k <= p.series; ++k)
    p.precision.push_back(exact(table, "tau" + std::to_string(k) + "_mean"));
  return p;
}

Problem light() {
  const Csv table = Csv::open("morley_exact.csv");
  const std::string prior = "Gamma(2.0;10000.0)_mu~N(0;1e8)";
  Problem p{readings(Csv::open("morley.csv"), "Expt", "Speed"), 5, 1e4, std::sqrt(1e4 / 2.0), 0.0, 0.0, {}};
  p.mean = exact(table, "mu_mean", prior);
  p.sd = exact(table, "mu_sd", prior);
  for (int k = 1; k <= p.series; ++k)
    p.precision.push_back(exact(table, "tau" + std::to_string(k) + "_mean", prior));
  return p;
}

engine::Estimate solve(const Problem& problem, const std::vector<std::size_t>& order) {
  engine::Model model = kalman_model();
  model.options.learn_precision = true;
  model.states = {state("mean", 0.0, problem.prior_sd, 0.0, {0.0})};
  for (int k = 0; k < problem.series; ++k) {
    model.channels.push_back(channel("series" + std::to_string(k + 1), problem.sheet_sd, {1.0}));
    model.channels.back().prior_readings = kPriorReadings;
  }
  engine::Engine engine = start(std::move(model));
  engine::TimeNs t = 0;
  for (const std::size_t i : order)
    read(engine, t += kSecond, problem.readings[i].series, problem.readings[i].value);
  return estimate(engine, t);
}

struct Answer {
  double mean = 0.0;
  double sd = 0.0;
};

// The textbook's recursive variational filter (Särkkä & Nummenmaa 2009, no forgetting), iterated to its fixed
// point: what taking one reading after another costs by itself.
Answer textbook(const Problem& problem, const std::vector<std::size_t>& order) {
  double mean = 0.0;
  double variance = problem.prior_sd * problem.prior_sd;
  const double a0 = 0.5 * kPriorReadings;
  std::vector<std::pair<double, double>> gamma(static_cast<std::size_t>(problem.series),
                                               {a0, a0 * problem.sheet_sd * problem.sheet_sd});
  for (const std::size_t i : order) {
    auto& [a, b] = gamma[static_cast<std::size_t>(problem.readings[i].series)];
    const double y = problem.readings[i].value;
    double next_b = b;
    double next_mean = mean;
    double next_variance = variance;
    for (int n = 0; n < 50; ++n) {
      const double gain = variance / (variance + next_b / (n == 0 ? a : a + 0.5));
      next_mean = mean + gain * (y - mean);
      next_variance = (1.0 - gain) * variance;
      next_b = b + 0.5 * ((y - next_mean) * (y - next_mean) + next_variance);
    }
    a += 0.5;
    b = next_b;
    mean = next_mean;
    variance = next_variance;
  }
  return {mean, std::sqrt(variance)};
}

/// Over orders, in exact posterior sds.
struct Spread {
  int count = 0;
  double sum = 0.0;
  double squares = 0.0;
  double worst = 0.0;
  double sd_lo = 10.0;
  double sd_hi = 0.0;

  void add(const Problem& problem, const Answer& answer) {
    const double off = (answer.mean - problem.mean) / problem.sd;
    ++count;
    sum += off;
    squares += off * off;
    worst = std::max(worst, std::fabs(off));
    sd_lo = std::min(sd_lo, answer.sd / problem.sd);
    sd_hi = std::max(sd_hi, answer.sd / problem.sd);
  }
  [[nodiscard]] double average() const { return sum / count; }
  [[nodiscard]] double rms() const { return std::sqrt(squares / count); }
  void print(const char* what) const {
    std::printf(
        "%s, %d orders: mean off by %.3f sd rms, %.3f on average, %.3f at most; sd ratio %.3f to %.3f\n",
        what, count, rms(), average(), worst, sd_lo, sd_hi);
  }
};

constexpr int kOrders = 200;
constexpr std::uint64_t kSeed = 1;

// The demand would be a mean within 0.1 exact sd, as a batch method has it. No method that takes one reading
// after another and forgets it meets that with so weak a prior, so the engine is held to the textbook's
// recursion, and to bounds of its own.
void expect_near_exact(const Problem& problem, const char* name, double rms, double average) {
  SCOPED_TRACE("seed " + std::to_string(kSeed));
  std::mt19937_64 random(kSeed);
  std::vector<std::size_t> order(problem.readings.size());
  std::iota(order.begin(), order.end(), std::size_t{0});
  Spread engine;
  Spread book;
  for (int i = 0; i < kOrders; ++i) {
    const auto e = solve(problem, order);
    engine.add(problem, {e.states[0].mean, e.states[0].sd});
    book.add(problem, textbook(problem, order));
    for (std::size_t k = order.size() - 1; k > 0; --k) std::swap(order[k], order[random() % (k + 1)]);
  }
  engine.print(name);
  book.print("  textbook recursion");
  EXPECT_LE(engine.rms(), rms);
  EXPECT_LE(std::fabs(engine.average()), average);
  EXPECT_LE(engine.rms(), 1.05 * book.rms());
  EXPECT_GE(engine.sd_lo, 0.8);
  EXPECT_LE(engine.sd_hi, 1.3);
}

TEST(CommonMean, GravityIsNearTheExactPosterior) { expect_near_exact(gravity(), "gravity", 0.6, 0.15); }

TEST(CommonMean, SpeedOfLightIsNearTheExactPosterior) { expect_near_exact(light(), "light", 0.8, 0.5); }

}  // namespace
}  // namespace steelyard::outside
