// SPDX-License-Identifier: Apache-2.0
// The capped precision's moments against a table of truncated Gammas, deep tail included. Source: NIST
// Digital Library of Mathematical Functions, ch. 8 (incomplete gamma functions); computed with mpmath to 30
// digits and cross-checked by quadrature.
#include <gtest/gtest.h>

#include "engine/gamma.h"
#include "outside/csv.h"
#include "outside/machines.h"

namespace steelyard::outside {
namespace {

TEST(TruncatedGamma, MomentsAreThePublishedOnes) {
  const Csv table = Csv::open("truncgamma.csv");
  ASSERT_EQ(table.rows(), 18U);
  for (std::size_t i = 0; i < table.rows(); ++i) {
    const double a = table.number(i, "a_shape");
    const double b = table.number(i, "b_rate");
    const double c = table.number(i, "c");
    SCOPED_TRACE("Gamma(" + std::to_string(a) + ", " + std::to_string(b) + ") below " + std::to_string(c));
    const double tolerance = table.number(i, "P_lt_c") < 1e-15 ? 1e-8 : 1e-10;
    // λ/c ~ Gamma(a, b·c): the engine's functions cap at one.
    const engine::Gamma g{a, b * c};
    EXPECT_LT(relative(c * mean_below_one(g), table.number(i, "E_l_given_lt_c")), tolerance);
    EXPECT_LT(relative(mean_of_min_with_one(g), table.number(i, "E_min_over_c")), tolerance);
    EXPECT_LT(relative(c * mean_of_min_with_one(g), table.number(i, "E_min_l_c")), tolerance);
  }
}

}  // namespace
}  // namespace steelyard::outside
