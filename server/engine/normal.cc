// SPDX-License-Identifier: Apache-2.0
// Normal densities and tails. The far tail uses the continued fraction of Mills' ratio (Abramowitz & Stegun
// 1964, 26.2.14). Checked in tests/engine/normal_test.cc.
#include "engine/normal.h"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace steelyard::engine {
namespace {

constexpr double kLogSqrt2Pi = 0.91893853320467274178;

// Mills' ratio (1 − Φ(x))/φ(x) for x ≥ 5, by 40 levels of the continued fraction (error < 1e-16 there).
double upper_mills(double x) {
  double f = x;
  for (int k = 40; k >= 1; --k) f = x + k / f;
  return 1.0 / f;
}

}  // namespace

double log_normal(double e, double variance) {
  return -0.5 * (e * e / variance + std::log(variance)) - kLogSqrt2Pi;
}

double normal_cdf(double z) { return 0.5 * std::erfc(-z / std::numbers::sqrt2); }

double log_normal_cdf(double z) {
  if (z > -5.0) return std::log(normal_cdf(z));
  return -0.5 * z * z - kLogSqrt2Pi + std::log(upper_mills(-z));
}

double bin_probability(double e, double sd, double width) {
  const double half = 0.5 * width / sd;
  const double z = std::fabs(e) / sd;
  // A narrow bin: density times width, with the second-order term; avoids the cancellation of two tails.
  if (half < 0.02) {
    const double density = std::exp(-0.5 * z * z - kLogSqrt2Pi);
    return density * 2.0 * half * (1.0 + half * half * (z * z - 1.0) / 6.0);
  }
  return normal_cdf(half - z) - normal_cdf(-half - z);
}

double inverse_mills(double z) {
  if (z < -5.0) return 1.0 / upper_mills(-z);
  return std::exp(-0.5 * z * z - kLogSqrt2Pi) / normal_cdf(z);
}

namespace {

Truncated truncate_above(double b) {
  const double mills = inverse_mills(b);
  return {log_normal_cdf(b), -mills, std::clamp(mills * (b + mills), 0.0, 1.0)};
}

// a < 0 and no farther from 0 than b is, so no tail is taken from 1.
Truncated truncate_both(double a, double b) {
  const double width = b - a;
  const double p = bin_probability(0.5 * (a + b), 1.0, width);
  if (p < 1e-290) {  // so far out that only the nearer end counts
    Truncated out = truncate_above(b);
    out.log_probability += std::log(-std::expm1(width * b));
    return out;
  }
  const auto density = [](double z) { return std::exp(-0.5 * z * z - kLogSqrt2Pi); };
  const double mean = (density(a) - density(b)) / p;
  const double variance = 1.0 + (a * density(a) - b * density(b)) / p - mean * mean;
  return {std::log(p), std::clamp(mean, a, b),
          1.0 - std::clamp(variance, 0.0, std::min(1.0, 0.25 * width * width))};
}

}  // namespace

Truncated truncate(double a, double b) {
  const bool mirror = a + b > 0.0 || std::isinf(b);
  if (mirror) {
    Truncated out = truncate(-b, -a);
    out.mean = -out.mean;
    return out;
  }
  return std::isinf(a) ? truncate_above(b) : truncate_both(a, b);
}

double log_sum(double a, double b) {
  const double top = a > b ? a : b;
  if (!(top > -1e300)) return top;
  return top + std::log1p(std::exp((a > b ? b : a) - top));
}

}  // namespace steelyard::engine
