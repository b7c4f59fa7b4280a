// SPDX-License-Identifier: Apache-2.0
// Gamma functions against 50-digit arithmetic and tables.
#include "engine/gamma.h"

#include <gtest/gtest.h>

#include <boost/math/special_functions/trigamma.hpp>

#include <boost/math/distributions/students_t.hpp>
#include <boost/math/special_functions/gamma.hpp>
#include <boost/multiprecision/cpp_bin_float.hpp>
#include <cmath>

#include "outside/csv.h"
#include "suite/random.h"

namespace steelyard::engine {
namespace {

using Wide = boost::multiprecision::cpp_bin_float_50;

// Another way than the code's: the two incomplete gamma functions themselves, whose tails would underflow or
// cancel in a double.
double wide_mean_below_one(double a, double b) {
  const Wide s = a;
  const Wide x = b;
  return static_cast<double>(boost::math::tgamma_lower(s + 1, x) / boost::math::tgamma_lower(s, x) / x);
}

TEST(GammaMean, BelowOneAgreesWithFiftyDigits) {
  for (const double a : {0.05, 0.5, 1.0, 2.0, 5.0, 5.5, 12.0, 40.0, 150.0})
    for (const double over : {1e-6, 1e-3, 0.1, 0.5, 0.9, 1.0, 1.1, 1.5, 3.0}) {
      const double exact = wide_mean_below_one(a, a * over);
      EXPECT_NEAR(mean_below_one({a, a * over}) / exact, 1.0, 1e-13) << "a " << a << ", b/a " << over;
    }
}

TEST(GammaMean, BelowOneAgreesWithFiftyDigitsOnRandomCases) {
  constexpr std::uint64_t kSeed = 11;
  suite::Random random(kSeed);
  for (int i = 0; i < 300; ++i) {
    const double a = std::exp(random.between(-3.0, 5.0));
    const double b = a * std::exp(random.between(-6.0, 2.0));
    EXPECT_NEAR(mean_below_one({a, b}) / wide_mean_below_one(a, b), 1.0, 1e-13)
        << "seed " << kSeed << ", case " << i << ": a " << a << ", b " << b;
  }
}

TEST(GammaMean, BelowOneTendsToItsLimits) {
  // b → 0: the density grows like κ^(a−1) up to the cap, whose mean is a/(a+1).
  EXPECT_NEAR(mean_below_one({5.0, 1e-300}), 5.0 / 6.0, 1e-15);
  // b ≫ a: nothing is cut off.
  EXPECT_NEAR(mean_below_one({5.0, 1e6}), 5e-6, 1e-20);
  EXPECT_NEAR(mean_below_one({1e6, 1e3}), 1.0, 2e-6);
}

TEST(GammaMean, OfMinWithOneAgreesWithFiftyDigits) {
  for (const double a : {0.5, 2.0, 5.0, 40.0})
    for (const double over : {1e-3, 0.5, 1.0, 1.5, 4.0}) {
      const Wide s = a;
      const Wide x = a * over;
      const Wide below = boost::math::gamma_p(s, x);
      const Wide exact = boost::math::gamma_p(s + 1, x) * s / x + (1 - below);
      EXPECT_NEAR(mean_of_min_with_one({a, a * over}), static_cast<double>(exact), 1e-14)
          << a << ", " << over;
    }
}

TEST(GammaHalfStep, AgreesWithFiftyDigits) {
  for (const double a : {1e-3, 0.1, 0.5, 1.0, 2.5, 5.0, 11.9, 12.1, 50.0, 1e3, 1e6, 1e9}) {
    const Wide s = a;
    const Wide exact = boost::math::lgamma(s + Wide(0.5)) - boost::math::lgamma(s);
    EXPECT_NEAR(log_gamma_half_step(a), static_cast<double>(exact), 1e-13) << a;
  }
}

// Source: mpmath 1.2.1, 25 digits.
TEST(GammaHalfStep, AgreesWithTheTable) {
  const auto table = outside::Csv::open("special.csv");
  const auto lgamma = [&](const std::string& args) {
    for (std::size_t i = 0; i < table.rows(); ++i)
      if (table.text(i, "function") == "lgamma" && table.text(i, "args") == args)
        return table.number(i, "value");
    throw std::runtime_error("no lgamma of " + args);
  };
  EXPECT_NEAR(log_gamma_half_step(0.5), lgamma("1") - lgamma("0.5"), 1e-13);
  EXPECT_NEAR(log_gamma_half_step(1.0), lgamma("1.5") - lgamma("1"), 1e-13);
  EXPECT_NEAR(log_gamma_half_step(1.5), lgamma("2") - lgamma("1.5"), 1e-13);
}

TEST(StudentT, AgreesWithTheDistribution) {
  for (const double a : {0.6, 2.0, 5.0, 50.0})
    for (const double scale : {1e-6, 1.0, 1e4})
      for (const double z : {0.0, 0.5, 3.0, 30.0}) {
        const double exact =
            std::log(boost::math::pdf(boost::math::students_t_distribution<Wide>(2.0 * a), Wide(z))
                         .convert_to<double>()) -
            std::log(scale);
        EXPECT_NEAR(log_student_t(z * scale, a, scale * scale), exact, 1e-11)
            << a << ", " << scale << ", " << z;
      }
}

TEST(Forgetting, RelaxesTowardsThePrior) {
  Gamma g{9.0, 3.0};
  forget(g, 5.0, 0.5);
  EXPECT_DOUBLE_EQ(g.a, 7.0);
  EXPECT_DOUBLE_EQ(g.b, 4.0);
  forget(g, 5.0, 0.0);
  EXPECT_DOUBLE_EQ(g.a, 5.0);
  EXPECT_DOUBLE_EQ(g.b, 5.0);
}

// Against the variance of log κ by the trigamma function.
TEST(Mixing, MatchesTheLogarithmsMeanAndVariance) {
  const Gamma g = mix({4.0, 8.0}, {6.0, 3.0}, 0.25);
  EXPECT_DOUBLE_EQ(g.mean(), std::pow(0.5, 0.75) * std::pow(2.0, 0.25));
  const double apart = std::log(4.0);
  const double variance =
      0.75 * boost::math::trigamma(4.0) + 0.25 * boost::math::trigamma(6.0) + 0.75 * 0.25 * apart * apart;
  EXPECT_NEAR(boost::math::trigamma(g.a), variance, 0.03 * variance);
}

TEST(Mixing, ALightPartDoesNotUndoWhatWasLearned) {
  const Gamma noisy{100.0, 1e6};
  const Gamma g = mix(noisy, {5.0, 5.0}, 0.01);
  EXPECT_NEAR(g.mean(), noisy.mean(), 0.1 * noisy.mean());
  EXPECT_LT(g.a, 3.0);
}

}  // namespace
}  // namespace steelyard::engine
