// SPDX-License-Identifier: Apache-2.0
// The Gamma posterior of a channel's precision. Precision is kept relative to the datasheet's:
// κ = λ / λ_spec, so the prior is Gamma(a0, a0) for every channel and the cap is κ ≤ 1.
#pragma once

namespace steelyard::engine {

/// Gamma(shape a, rate b); mean a/b.
struct Gamma {
  double a = 5.0;
  double b = 5.0;
  [[nodiscard]] double mean() const { return a / b; }
};

/// E[κ | κ ≤ 1] for κ ~ Gamma(a, b): (a/b) · P(a+1, b)/P(a, b), P the regularised lower incomplete gamma
/// function (DLMF 8.2.4). Computed from Kummer's series (DLMF 8.7.1), all of whose terms are positive: no
/// cancellation and no underflow, however deep the tail. Relative error < 1e-14; a, b > 0.
[[nodiscard]] double mean_below_one(const Gamma& g);

/// E[min(κ, 1)] = (a/b) · P(a+1, b) + 1 − P(a, b). In [0, 1].
[[nodiscard]] double mean_of_min_with_one(const Gamma& g);

/// Relaxes `g` towards the prior Gamma(a0, a0); keep = 1 leaves it, keep = 0 forgets all.
void forget(Gamma& g, double a0, double keep);

/// log Γ(a+½) − log Γ(a), a > 0; absolute error < 1e-13.
[[nodiscard]] double log_gamma_half_step(double a);

/// log density at e of Student's t with 2a degrees of freedom, location 0 and scale² `scale2`.
[[nodiscard]] double log_student_t(double e, double a, double scale2);

/// The merge of two Gammas with weights 1 − p and p, matched in the mean and variance of log κ
/// (approximately, see gamma.cc). A mean of κ itself would be that of the more precise one, however light:
/// one per cent of a hypothesis that has just taken a noisy channel for sound would undo all that was learned
/// of its noise.
[[nodiscard]] Gamma mix(const Gamma& g, const Gamma& h, double p);

}  // namespace steelyard::engine
