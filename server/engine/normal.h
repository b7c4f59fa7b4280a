// SPDX-License-Identifier: Apache-2.0
// The normal distribution: densities, tails, and the moments of a normal cut off on one side.
#pragma once

namespace steelyard::engine {

/// log N(e; 0, variance), variance > 0.
[[nodiscard]] double log_normal(double e, double variance);

/// P(Z ≤ z) for a standard normal, and its logarithm (finite for all finite z).
[[nodiscard]] double normal_cdf(double z);
[[nodiscard]] double log_normal_cdf(double z);

/// P(|Z·sd + e| ≤ width/2), sd > 0: the probability of the bin of that width around e; accurate for any
/// ratio.
[[nodiscard]] double bin_probability(double e, double sd, double width);

/// φ(z)/Φ(z), the inverse Mills ratio; tends to −z for z → −∞.
[[nodiscard]] double inverse_mills(double z);

/// A standard normal, given that it lies in [a, b].
struct Truncated {
  double log_probability = 0.0;  ///< of lying there
  double mean = 0.0;
  double shrink = 0.0;  ///< 1 − variance, in [0, 1]
};
/// a < b, either may be infinite. Moments: Johnson, Kotz & Balakrishnan 1994, ch. 13.
[[nodiscard]] Truncated truncate(double a, double b);

/// log(exp(a) + exp(b)).
[[nodiscard]] double log_sum(double a, double b);

}  // namespace steelyard::engine
