// SPDX-License-Identifier: Apache-2.0
// Gamma posterior of a relative precision. Checked in tests/engine/gamma_test.cc against an independent
// library and in tests/outside against the published truncated-Gamma table.
#include "engine/gamma.h"

#include <algorithm>
#include <boost/math/special_functions/gamma.hpp>
#include <cmath>
#include <numbers>

namespace steelyard::engine {
namespace {

// Past this the series' sum is so large that the truncation at 1 no longer changes a double.
constexpr double kNoTruncation = 1e17;
// The series needs about 9·√a terms near b = a; 100000 terms cover a = 1e8, far beyond any memory.
constexpr int kMaxTerms = 100000;

// Doubles are precise enough here; by default the library would compute in long double.
using Policy = boost::math::policies::policy<boost::math::policies::promote_double<false>>;

}  // namespace

double mean_below_one(const Gamma& g) {
  // P(a, b) = b^a e^-b / Γ(a+1) · M and P(a+1, b) = P(a, b) − b^a e^-b / Γ(a+1), hence the ratio is
  // (M − 1)/M with M = 1 + b/(a+1) + b²/((a+1)(a+2)) + …
  // Four terms at a time over their common denominator: one division in place of four that wait for each
  // other.
  const double x = g.b;
  double last = 1.0;
  double rest = 0.0;
  for (int n = 1; n < kMaxTerms; n += 4) {
    const double p1 = g.a + n;
    const double p2 = p1 + 1.0;
    const double p3 = p1 + 2.0;
    const double p4 = p1 + 3.0;
    const double p34 = p3 * p4;
    const double ratio = x / (p1 * p2 * p34);
    rest += last * (ratio * (p2 * p34 + x * (p34 + x * (p4 + x))));
    last *= ratio * (x * x * x);
    if (!(rest < kNoTruncation)) return g.mean();
    // What is left is at most a geometric series with the next ratio of terms.
    if (last * x < rest * 1e-16 * (p4 + 1.0 - x)) break;
  }
  return g.mean() * (rest / (1.0 + rest));
}

double mean_of_min_with_one(const Gamma& g) {
  const double below = boost::math::gamma_p(g.a, g.b, Policy());
  // P(a+1, b) from P(a, b) would cancel in the far tail; the truncated mean does not.
  return std::clamp(below * mean_below_one(g) + (1.0 - below), 0.0, 1.0);
}

void forget(Gamma& g, double a0, double keep) {
  g.a = a0 + keep * (g.a - a0);
  g.b = a0 + keep * (g.b - a0);
}

double log_gamma_half_step(double a) {
  // Γ(a+½)/Γ(a) rises to the asymptotic region by a/(a+½); then the series of log Γ(a+½) − log Γ(a)
  // (from Stirling's, DLMF 5.11.8) in 1/a.
  double shift = 1.0;
  while (a < 12.0) {
    shift *= a / (a + 0.5);
    a += 1.0;
  }
  const double x = 1.0 / a;
  const double x2 = x * x;
  const double series =
      x *
      (-1.0 / 8.0 + x2 * (1.0 / 192.0 + x2 * (-1.0 / 640.0 + x2 * (17.0 / 14336.0 - x2 * (31.0 / 18432.0)))));
  return 0.5 * std::log(a) + series + std::log(shift);
}

double log_student_t(double e, double a, double scale2) {
  const double spread = 2.0 * a * scale2;
  return log_gamma_half_step(a) - 0.5 * std::log(std::numbers::pi * spread) -
         (a + 0.5) * std::log1p(e * e / spread);
}

namespace {

// Variance of log κ, the trigamma function at a: its asymptotic series' first two terms (DLMF 5.15.8), right
// within a quarter down to a = 0.3 and still growing as 1/a² below; and what a gives that variance.
double log_variance(double a) { return (1.0 + 0.5 / a) / a; }
double shape_of(double log_variance) {
  return (1.0 + std::sqrt(1.0 + 2.0 * log_variance)) / (2.0 * log_variance);
}

}  // namespace

Gamma mix(const Gamma& g, const Gamma& h, double p) {
  if (g.a == h.a && g.b == h.b) return g;
  const double apart = std::log(h.mean()) - std::log(g.mean());
  const double mean = g.mean() * std::exp(p * apart);
  const double a =
      shape_of((1.0 - p) * log_variance(g.a) + p * log_variance(h.a) + p * (1.0 - p) * apart * apart);
  return {a, a / mean};
}

}  // namespace steelyard::engine
