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

// After a variance has fallen by many orders its covariances can exceed what it allows (Cauchy–Schwarz).
void bound_covariances(Hypothesis& h) {
  for (int i = 0; i < h.dim; ++i) {
    h.p(i, i) = std::max(h.p(i, i), 0.0);
    for (int k = 0; k < i; ++k) {
      const double most = std::sqrt(h.p(i, i)) * std::sqrt(h.p(k, k));
      h.p(i, k) = h.p(k, i) = std::clamp(h.p(i, k), -most, most);
    }
  }
}

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
// The plain variational update counts every reading as half a degree of freedom, however little of it is
// noise: the Fisher information of a residual of variance s + r on log r is ½·(r/(s + r))². What the gain
// takes away is left out of both parameters (it would be an observation of just what is believed already).
template <typename SecondMoment>
double Likelihood::learn(Gamma& g, double s, double r, double spec, double weight,
                         const SecondMoment& second_moment) const {
  if (!model_.options.learn_precision) return r;
  Gamma next = g;
  for (int i = 0; i < kFixedPointSteps; ++i) {
    const double gain = s / (s + r);
    const double seen = (1.0 - gain) * (1.0 - gain);
    const double squared = seen * second_moment(s + r) + s * (1.0 - gain) - (1.0 - seen) * r;
    next = {g.a + 0.5 * weight * seen, std::max(g.b + 0.5 * weight * squared / spec, 0.5 * g.b)};
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

// The walk's step over the gap is part of what the reading shows, with variance v of S: the score and the
// Fisher information of log v move the Gamma of the walk's precision (a natural-gradient step: Amari 1998).
// The plain variational update counts each reading as half an observation of the step, however little it
// shows of it.
void Likelihood::learn_walk(Hypothesis& h, const Occasion& o, const Step& step) const {
  const Condition condition = h.conditions.of(o.channel);
  if (!learns_speed(condition) || !model_.options.learn_walk) return;
  Gamma& g = h.walk[o.channel];
  const double mean = g.mean();
  const double v = o.walked[static_cast<std::size_t>(condition)] / mean;
  const double share = v / step.total_variance;
  const double surprise = step.shift * step.shift / step.total_variance - 1.0;
  g.a += 0.5 * step.weight * share * share;
  g.b += 0.5 * step.weight * (share * share + share * surprise) / mean;
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
  constexpr double kLost = 1e-10;  // of a variance is left: its covariances may be rounding errors
  bool lost = false;
  for (int i = 0; i < h.dim; ++i) {
    h.mean[i] += by_mean * column[i];
    double* row = h.cov + i * h.dim;
    const double variance = row[i];
    for (int k = 0; k <= i; ++k) {
      row[k] += by_cov * (column[i] * column[k]);
      h.cov[k * h.dim + i] = row[k];
    }
    lost = lost || row[i] < kLost * variance;
  }
  if (lost) bound_covariances(h);
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

// The true value lies beyond a bound, or between two: the state moves by the moments of a normal that is cut
// off there (Tobin 1958). The noise learns too: were it to learn from the readings inside the range alone, it
// would see the tails only, and from the reports of an on-change source alone, just the noise that made it
// report.
Absorbed Likelihood::absorb_censored(Hypothesis& h, const Occasion& o, double r) {
  const double below = o.censoring == Censoring::kBelow ? -INFINITY : o.bound - expected_.mean;
  const double above = o.censoring == Censoring::kBelow   ? o.bound - expected_.mean
                       : o.censoring == Censoring::kAbove ? INFINITY
                                                          : o.upper - expected_.mean;
  const auto cut = [below, above](double total) {
    const double sd = std::sqrt(total);
    return truncate(below / sd, above / sd);
  };
  const double s = expected_.variance;
  const double log_inside = cut(s + r).log_probability + std::log(o.regular);
  Absorbed out;
  out.log_likelihood = log_sum(log_inside, std::log((1.0 - o.regular) * o.elsewhere));
  Step step;
  step.weight = std::exp(log_inside - out.log_likelihood);
  const auto second_moment = [&cut](double total) {
    const Truncated t = cut(total);
    return total * std::max(1.0 - t.shrink + t.mean * t.mean, 0.0);
  };
  r = learn(h.noise[o.channel], s, r, expected_.spec_variance, step.weight, second_moment);
  step.total_variance = s + r;
  const Truncated t = cut(step.total_variance);
  step.shift = t.mean * std::sqrt(step.total_variance);
  step.shrink = t.shrink;
  out.influence = influence(step);
  move(h, step);
  return out;
}

// The reading shows the sum of what it tells of the machine and of its correlated noise: what is new of that
// noise is part of both (measurement differencing: Bryson & Henrikson 1968, here with the state augmented).
void Likelihood::add_fresh_noise(Hypothesis& h, int channel, double r) {
  const int at = layout_.colour_at[static_cast<std::size_t>(channel)];
  if (at < 0) return;
  h.p(at, at) += r;
  expected_.column[static_cast<std::size_t>(at)] += r;
}

void Likelihood::reset_colour(Hypothesis& h, int channel, double time_s) const {
  const int at = layout_.colour_at[static_cast<std::size_t>(channel)];
  if (at < 0) return;
  for (int k = 0; k < h.dim; ++k) h.p(at, k) = h.p(k, at) = 0.0;
  h.mean[at] = 0.0;
  h.p(at, at) = noise_variance(h.noise[channel], projector_.spec_variance(h, channel, 0, time_s));
}

void Likelihood::start_noise(Hypothesis& h, int channel) const {
  if (layout_.part_count[static_cast<std::size_t>(channel)] > 1) return vector_.start_noise(h, channel);
  const double a0 = prior_shape(model_.channels[static_cast<std::size_t>(channel)]);
  h.noise[channel] = {a0, a0};
}

void Likelihood::start_noise(Hypothesis& h, int channel, std::span<const double> variance,
                             double time_s) const {
  constexpr double kShape = 1.5;
  if (layout_.part_count[static_cast<std::size_t>(channel)] > 1)
    return vector_.start_noise(h, channel, kShape, variance, time_s);
  const double spec = projector_.spec_variance(h, channel, 0, time_s);
  h.noise[channel] = {kShape, kShape * (1.0 + variance.front() / spec)};
}

void Likelihood::forget_noise(Hypothesis& h, int channel, double keep) const {
  if (layout_.part_count[static_cast<std::size_t>(channel)] > 1) return vector_.forget(h, channel, keep);
  forget(h.noise[channel], prior_shape(model_.channels[static_cast<std::size_t>(channel)]), keep);
}

Absorbed Likelihood::absorb(Hypothesis& h, const Occasion& o) {
  const auto j = static_cast<std::size_t>(o.channel);
  const Condition condition = h.conditions.of(o.channel);
  if (layout_.part_count[j] > 1) return vector_.absorb(h, o);
  projector_.project(h, o.channel, 0, condition, o.time_s, expected_);
  // A hypothesis that expects nothing takes the reading for as likely as a stray, and learns nothing from it.
  if (!expected_.known()) return {std::log(o.elsewhere), 0.0, 0.0};
  if (condition != Condition::kStuck) expected_.spec_variance *= o.fresh;
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
  const double learned = learn(g, s, r, expected_.spec_variance, step.weight, [e](double) { return e * e; });
  step.total_variance = s + learned;
  if (condition == Condition::kStuck) {
    reset_colour(h, o.channel, o.time_s);
  } else {
    add_fresh_noise(h, o.channel, learned);
  }
  learn_walk(h, o, step);
  out.influence = influence(step);
  move(h, step);
  return out;
}

double Likelihood::begin_offset(Hypothesis& h, const Occasion& o) {
  if (o.censoring != Censoring::kNone) {
    const double size = model_.channels[static_cast<std::size_t>(o.channel)].offset_size;
    const int at = add_own(h, o.channel, 1);
    h.p(at, at) = size * size;
    return absorb(h, o).log_likelihood;
  }
  if (layout_.part_count[static_cast<std::size_t>(o.channel)] > 1) return vector_.begin_offset(h, o);
  projector_.project(h, o.channel, 0, Condition::kSound, o.time_s, expected_);
  if (!expected_.known()) return NAN;
  const double r = noise_variance(h.noise[o.channel], o.fresh * expected_.spec_variance);
  add_fresh_noise(h, o.channel, r);
  const double e = residual(o, expected_.mean);
  const double variance = expected_.variance + r;
  for (int i = 0; i < h.dim; ++i) expected_.column[static_cast<std::size_t>(i)] *= -1.0;
  add_own(h, o.channel, e, variance, expected_.column.data());
  const double size = model_.channels[static_cast<std::size_t>(o.channel)].offset_size;
  return log_normal(e, variance + size * size);
}

void Likelihood::begin_level(Hypothesis& h, const Occasion& o) {
  if (layout_.part_count[static_cast<std::size_t>(o.channel)] > 1) return vector_.begin_level(h, o);
  const double variance = projector_.spec_variance(h, o.channel, 0, o.time_s);
  reset_colour(h, o.channel, o.time_s);
  const int at = add_own(h, o.channel, 1);
  h.mean[at] = o.value;
  h.p(at, at) = variance;
}

}  // namespace steelyard::engine
