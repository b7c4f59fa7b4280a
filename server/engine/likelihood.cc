// SPDX-License-Identifier: Apache-2.0
// Likelihood and update for one scalar reading (engine.md §4 steps 1–5): a Student-t regular part beside
// uniform strays, and the variational fixed point of the variational Bayesian adaptive Kalman filter (Särkkä
// & Nummenmaa 2009) inside each hypothesis.
#include "engine/likelihood.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "engine/normal.h"

namespace steelyard::engine {
namespace {

constexpr double kCoarse = 0.3;  // resolution over predicted sd from which the bin's probability counts
constexpr int kFixedPointSteps = 8;
constexpr double kFixedPointTolerance = 1e-2;

}  // namespace

double Likelihood::noise_variance(const Gamma& g, double spec_variance) const {
  if (!model_.options.learn_precision) return spec_variance;
  return spec_variance / (model_.options.cap_precision ? mean_below_one(g) : g.mean());
}

// A reading outside the range is not fused, so what is said of one is given that it lies inside; strays are
// uniform there. Matters where the machine is all but unknown, after a long gap: every reading would
// otherwise be likelier as a stray. Taken about the expectation, so that a hypothesis gains nothing by
// expecting what lies outside.
double Likelihood::log_within(double span, double variance) {
  const double half = 0.5 * span / std::sqrt(variance);
  return half > 8.0 ? 0.0 : std::log(std::erf(half / std::numbers::sqrt2));
}

double Likelihood::residual(const Occasion& occasion, double expected) const {
  const double e = occasion.value - expected;
  const double turn = model_.channels[static_cast<std::size_t>(occasion.channel)].modulo;
  return turn > 0.0 ? std::remainder(e, turn) : e;
}

double Likelihood::log_regular(double e, const Gamma& g, double total_variance, double resolution) const {
  const double sd = std::sqrt(total_variance);
  if (resolution > kCoarse * sd)
    return std::log(std::max(bin_probability(e, sd, resolution), 1e-300) / resolution);
  if (!model_.options.learn_precision) return log_normal(e, total_variance);
  return log_student_t(e, g.a, total_variance);
}

// Updates g and returns the noise variance at the fixed point of (noise variance, gain), which is scalar.
// second_moment: of (y − expected)² given what the reading tells, as a function of the total variance.
template <typename SecondMoment>
double Likelihood::learn(Gamma& g, double s, double r, double spec, double weight,
                         const SecondMoment& second_moment) const {
  if (!model_.options.learn_precision) return r;
  Gamma next = g;
  for (int i = 0; i < kFixedPointSteps; ++i) {
    const double gain = s / (s + r);
    const double squared = (1.0 - gain) * (1.0 - gain) * second_moment(s + r) + s * (1.0 - gain);
    next = {g.a + 0.5 * weight, g.b + 0.5 * weight * squared / spec};
    const double before = r;
    r = noise_variance(next, spec);
    if (std::fabs(r - before) <= kFixedPointTolerance * before) break;
  }
  g = next;
  return r;
}

double Likelihood::influence(const Step& step) const {
  double sum = 0.0;
  for (int i = 0; i < layout_.states && i < expected_.slope.size(); ++i)
    sum += expected_.slope(i) * expected_.column[static_cast<std::size_t>(i)];
  return step.weight * step.shrink * sum / step.total_variance;
}

// Moments of the mixture of the updated and the untouched Gaussian.
void Likelihood::move(Hypothesis& h, const Step& step) {
  // A covariance beyond what the variances allow (Cauchy–Schwarz) is rounding error: nothing is known of it.
  for (int i = 0; i < h.dim; ++i) {
    double& c = expected_.column[static_cast<std::size_t>(i)];
    if (c * c > h.p(i, i) * step.total_variance) c = 0.0;
  }
  const double by_mean = step.weight * step.shift / step.total_variance;
  const double by_cov = (-step.weight * step.shrink * step.total_variance +
                         step.weight * (1.0 - step.weight) * step.shift * step.shift) /
                        (step.total_variance * step.total_variance);
  const double* column = expected_.column.data();
  for (int i = 0; i < h.dim; ++i) {
    h.mean[i] += by_mean * column[i];
    const double scaled = by_cov * column[i];
    double* row = h.cov + i * h.dim;
    for (int k = 0; k < h.dim; ++k) row[k] += scaled * column[k];
  }
}

// With the noise that the likelihood itself uses, so that the factor of repeats.h corrects just that
// likelihood.
double Likelihood::repeat_probability(const Occasion& o, double noise_variance) const {
  Occasion last = o;
  last.value = o.last_value;
  const double e = residual(last, expected_.mean);
  const double inside = bin_probability(e, std::sqrt(expected_.variance + noise_variance), o.resolution);
  return o.regular * inside + (1.0 - o.regular) * o.resolution / o.span;
}

// The true value lies beyond the bound: the state moves by the moments of a normal that is cut off there
// (Tobin 1958). The noise learns too: were it to learn from the readings inside the range alone, it would see
// the tails only.
Absorbed Likelihood::absorb_censored(Hypothesis& h, const Occasion& o, double r) {
  const double side = o.censoring == Censoring::kBelow ? 1.0 : -1.0;
  const double reach = side * (o.bound - expected_.mean);
  const double s = expected_.variance;
  const double log_inside = log_normal_cdf(reach / std::sqrt(s + r)) + std::log(o.regular);
  Absorbed out;
  out.log_likelihood = log_sum(log_inside, std::log((1.0 - o.regular) * o.elsewhere));
  Step step;
  step.weight = std::exp(log_inside - out.log_likelihood);
  const auto second_moment = [reach](double total) {
    const double z = reach / std::sqrt(total);
    return total * std::max(1.0 - z * inverse_mills(z), 0.0);
  };
  step.total_variance =
      s + learn(h.noise[o.channel], s, r, expected_.spec_variance, step.weight, second_moment);
  const double sd = std::sqrt(step.total_variance);
  const double z = reach / sd;
  const double mills = inverse_mills(z);
  step.shift = -side * mills * sd;
  step.shrink = std::clamp(mills * (z + mills), 0.0, 1.0);
  out.influence = influence(step);
  move(h, step);
  return out;
}

Absorbed Likelihood::absorb(Hypothesis& h, const Occasion& o) {
  const auto j = static_cast<std::size_t>(o.channel);
  projector_.project(h, o.channel, h.conditions.of(o.channel), o.time_s, expected_);
  // A hypothesis that expects nothing takes the reading for as likely as a stray, and learns nothing from it.
  if (!expected_.known()) return {std::log(o.elsewhere), 0.0, 0.0};
  Gamma& g = h.noise[o.channel];
  const double s = expected_.variance;
  const double r = noise_variance(g, expected_.spec_variance);
  if (o.censoring != Censoring::kNone) return absorb_censored(h, o, r);
  const double e = residual(o, expected_.mean);
  const double log_inside = std::log(o.regular) + log_regular(e, g, s + r, model_.channels[j].resolution) -
                            log_within(o.span, s + r);
  Absorbed out;
  out.log_likelihood =
      o.regular < 1.0 ? log_sum(log_inside, std::log((1.0 - o.regular) * o.elsewhere)) : log_inside;
  if (!o.first) out.repeat_probability = repeat_probability(o, r);
  Step step;
  step.weight = std::exp(log_inside - out.log_likelihood);
  step.shift = e;
  step.total_variance =
      s + learn(g, s, r, expected_.spec_variance, step.weight, [e](double) { return e * e; });
  out.influence = influence(step);
  move(h, step);
  return out;
}

}  // namespace steelyard::engine
