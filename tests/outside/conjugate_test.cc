// SPDX-License-Identifier: Apache-2.0
// Learning a precision while the state is known exactly: Gamma posteriors and Student-t predictions. Source:
// Gelman et al. 2013, Bayesian Data Analysis, 3rd ed., s. 2.6 and 3.6; Murphy 2007, Conjugate Bayesian
// Analysis of the Gaussian Distribution. Data invented, numbers computed with mpmath to 40 digits.
#include <gtest/gtest.h>

#include "engine/gamma.h"
#include "outside/csv.h"
#include "outside/machines.h"

namespace steelyard::outside {
namespace {

struct Case {
  const char* name;
  double a0, b0, mean;
  std::vector<double> y;
};

// What ctest shows of a case; without it the bytes of its pointers.
void PrintTo(const Case& c, std::ostream* out) { *out << "case " << c.name; }

const Case kCaseA{"A", 2.0, 3.0, 10.0, {9.8, 10.4, 10.1, 9.5, 11.2}};
const Case kCaseB{"B", 1e-3, 1e-3, 0.0, {0.5, -1.2, 2.0}};
const Case kCaseC{"C", 2.0, 0.02, 5.0, {5.1, 4.9, 5.05, 4.8, 5.3, 5.0, 4.7, 5.25}};
constexpr std::array<const char*, 4> kAhead{"0", "0.5", "1", "3"};

// The engine's precision is λ = κ/sd² with κ ~ Gamma(a0, a0): λ ~ Gamma(a0, b0) asks for sd² = b0/a0 and a0 =
// prior_readings/2.
engine::Engine known_mean(const Case& c) {
  engine::Model model = kalman_model();
  model.options.learn_precision = true;
  model.states = {state("x", c.mean, 1e-9, 0.0, {0.0})};
  model.channels = {channel("y", std::sqrt(c.b0 / c.a0), {1.0})};
  model.channels[0].prior_readings = 2.0 * c.a0;
  return start(model);
}

class KnownMean : public testing::TestWithParam<Case> {};

TEST_P(KnownMean, PosteriorEvidenceAndPredictionAreThePublishedOnes) {
  const Case& c = GetParam();
  const Csv table = Csv::open("known_mean_gamma.csv");
  engine::Engine engine = known_mean(c);
  engine::TimeNs t = 0;
  for (const double y : c.y) read(engine, t += kSecond, 0, y);
  const double noise_sd = estimate(engine, t).channels[0].noise_sd;
  EXPECT_LT(relative(1.0 / (noise_sd * noise_sd), value_of(table, c.name, "E_tau")), 1e-12);
  EXPECT_LT(relative(noise_sd * noise_sd, value_of(table, c.name, "pred_scale2")), 1e-12);
  EXPECT_NEAR(engine.log_evidence(), value_of(table, c.name, "log_evidence"), 1e-12);
  for (const char* ahead : kAhead) {
    engine::Engine next = engine;
    read(next, t + kSecond, 0, c.mean + std::stod(ahead));
    EXPECT_NEAR(next.log_evidence() - engine.log_evidence(),
                value_of(table, c.name, std::string("log_pred_at_theta+") + ahead), 1e-11)
        << "at the mean + " << ahead;
  }
}

INSTANTIATE_TEST_SUITE_P(Published, KnownMean, testing::Values(kCaseA, kCaseC),
                         [](const auto& tested) { return std::string(tested.param.name); });

// A prior worth less than two readings (case B) is refused by the engine's model: there the prior mean of the
// variance does not exist. The functions that it uses are checked instead, for all three cases.
TEST(GammaFunctions, PredictionIsThePublishedStudentT) {
  const Csv table = Csv::open("known_mean_gamma.csv");
  for (const Case& c : {kCaseA, kCaseB, kCaseC}) {
    const engine::Gamma g{value_of(table, c.name, "a_n"), value_of(table, c.name, "b_n")};
    EXPECT_LT(relative(g.mean(), value_of(table, c.name, "E_tau")), 1e-12);
    for (const char* ahead : kAhead)
      EXPECT_NEAR(engine::log_student_t(std::stod(ahead), g.a, 1.0 / g.mean()),
                  value_of(table, c.name, std::string("log_pred_at_theta+") + ahead), 1e-12)
          << c.name << " at the mean + " << ahead;
  }
}

}  // namespace
}  // namespace steelyard::outside
