// SPDX-License-Identifier: Apache-2.0
// Exact discretisation against closed forms and the block exponential. Source: Van Loan 1978, IEEE Trans.
// Automatic Control 23(3):395; noise models: Bar-Shalom, Li & Kirubarajan 2001, Estimation with Applications
// to Tracking and Navigation, ch. 6; Singer 1970. Numbers computed with scipy 1.10.1 and closed forms.
#include "engine/discretise.h"

#include <gtest/gtest.h>

#include "outside/csv.h"
#include "outside/machines.h"

namespace steelyard::outside {
namespace {

// A chain of integrators with noise of density q on the last; `fade_s` > 0: the last one decays.
engine::LinearSystem chain(int n, double q, double fade_s) {
  engine::LinearSystem s{engine::CoreMatrix::Zero(n, n), engine::CoreVector::Zero(n),
                         engine::CoreVector::Zero(n)};
  for (int i = 0; i + 1 < n; ++i) s.rate(i, i + 1) = 1.0;
  if (fade_s > 0.0) s.rate(n - 1, n - 1) = -1.0 / fade_s;
  s.density(n - 1) = q;
  return s;
}

engine::LinearSystem system_named(const std::string& name, double q) {
  if (name == "CWNA2") return chain(2, q, 0.0);
  if (name == "CWPA3") return chain(3, q, 0.0);
  // q of these two is 2·variance/time constant = 2·2/5 = 0.8.
  if (name == "OU_tau5_sig2_2") return chain(1, q, 5.0);
  if (name == "Singer3_tau5_sig2_2") return chain(3, q, 5.0);
  throw std::runtime_error("no such model: " + name);
}

TEST(VanLoan, TransitionsAndNoiseAreThePublishedOnes) {
  const Csv table = Csv::open("cwna_Q.csv");
  ASSERT_GT(table.rows(), 100U);
  engine::Transition move;
  for (std::size_t i = 0; i < table.rows(); ++i) {
    const std::string& name = table.text(i, "model");
    const double t = table.number(i, "T");
    discretise(system_named(name, table.number(i, "q")), t, move);
    const auto row = static_cast<Eigen::Index>(table.number(i, "i"));
    const auto column = static_cast<Eigen::Index>(table.number(i, "j"));
    EXPECT_LT(relative(move.transition(row, column), table.number(i, "F_ij")), 1e-9)
        << name << " T = " << t << " F(" << row << ", " << column << ")";
    EXPECT_LT(relative(move.noise(row, column), table.number(i, "Q_ij")), 1e-9)
        << name << " T = " << t << " Q(" << row << ", " << column << ")";
  }
}

}  // namespace
}  // namespace steelyard::outside
