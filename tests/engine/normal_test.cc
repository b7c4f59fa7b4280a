// SPDX-License-Identifier: Apache-2.0
// Normal densities and tails against 50-digit arithmetic and tables.
#include "engine/normal.h"

#include <gtest/gtest.h>

#include <boost/math/special_functions/erf.hpp>
#include <boost/multiprecision/cpp_bin_float.hpp>
#include <cmath>

#include "outside/csv.h"

namespace steelyard::engine {
namespace {

using Wide = boost::multiprecision::cpp_bin_float_50;

Wide wide_cdf(const Wide& z) { return boost::math::erfc(-z / sqrt(Wide(2))) / 2; }
Wide wide_density(const Wide& z) { return exp(-z * z / 2) / sqrt(2 * boost::math::constants::pi<Wide>()); }

const std::vector<double> kPlaces{-37.0, -20.0, -8.0, -5.001, -4.999, -3.0, -1.0,
                                  -0.1,  0.0,   0.1,  1.0,    3.0,    5.0,  8.0};

TEST(Normal, DistributionAgreesWithFiftyDigits) {
  for (const double z : kPlaces) {
    const Wide exact = wide_cdf(Wide(z));
    EXPECT_NEAR(normal_cdf(z) / static_cast<double>(exact), 1.0, 1e-13) << z;
    EXPECT_NEAR(log_normal_cdf(z), static_cast<double>(log(exact)), 1e-14 * (1.0 + z * z)) << z;
    EXPECT_NEAR(inverse_mills(z) / static_cast<double>(wide_density(Wide(z)) / exact), 1.0, 1e-13) << z;
  }
}

// Source: mpmath 1.2.1, 25 digits.
TEST(Normal, LogarithmOfTheTailAgreesWithTheTable) {
  const auto table = outside::Csv::open("special.csv");
  int found = 0;
  for (std::size_t i = 0; i < table.rows(); ++i) {
    if (table.text(i, "function") != "log_norm_cdf") continue;
    const double exact = table.number(i, "value");
    EXPECT_NEAR(log_normal_cdf(table.number(i, "args")), exact, 1e-12 * std::max(1.0, std::fabs(exact)))
        << table.text(i, "args");
    ++found;
  }
  EXPECT_GE(found, 9);
}

TEST(Normal, FarTailsAreFinite) {
  for (const double z : {-1e3, -1e8, -1e150}) {
    EXPECT_TRUE(std::isfinite(log_normal_cdf(z))) << z;
    EXPECT_NEAR(inverse_mills(z) / -z, 1.0, 2.0 / (z * z) + 1e-15) << z;
  }
  EXPECT_EQ(inverse_mills(1e3), 0.0);
}

TEST(Normal, DensityIsTheFormula) {
  EXPECT_NEAR(log_normal(3.0, 4.0), static_cast<double>(log(wide_density(Wide(1.5)) / 2)), 1e-15);
}

// Below half a bin of 0.02 sd the code takes a series, above it the difference of two tails.
TEST(Bin, ProbabilityAgreesWithFiftyDigits) {
  for (const double half : {1e-9, 1e-4, 0.0199, 0.0201, 0.3, 2.0, 10.0})
    for (const double z : {0.0, 0.5, 2.0, 5.0}) {
      const Wide exact = wide_cdf(Wide(half) - Wide(z)) - wide_cdf(-Wide(half) - Wide(z));
      const double sd = 0.7;
      const double p = bin_probability(-z * sd, sd, 2.0 * half * sd);
      // The series leaves half⁴·z⁴/120 behind: 1e-6 at five sds, where the bin is 1e-6 itself.
      EXPECT_NEAR(p / static_cast<double>(exact), 1.0, z > 2.0 ? 1e-5 : 1e-7) << half << ", " << z;
    }
}

TEST(LogSum, AddsInTheLogarithm) {
  EXPECT_NEAR(log_sum(std::log(2.0), std::log(3.0)), std::log(5.0), 1e-15);
  EXPECT_DOUBLE_EQ(log_sum(-1000.0, 0.0), 0.0);
  EXPECT_DOUBLE_EQ(log_sum(-INFINITY, -3.0), -3.0);
  EXPECT_DOUBLE_EQ(log_sum(-3.0, -INFINITY), -3.0);
  EXPECT_EQ(log_sum(-INFINITY, -INFINITY), -INFINITY);
  EXPECT_NEAR(log_sum(-1e5, -1e5), -1e5 + std::log(2.0), 1e-10);
}

}  // namespace
}  // namespace steelyard::engine
