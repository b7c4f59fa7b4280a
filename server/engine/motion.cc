// SPDX-License-Identifier: Apache-2.0
// Prediction. An affine law moves by its exact discretisation, cached by gap. Any other law moves in steps of
// at most a twentieth of the response time; in each, its rates are replaced by their statistical linear
// regression over sigma points (cubature points: Arasaratnam & Haykin 2009; regression: Lefebvre, Bruyninckx
// & De Schutter 2002) and the resulting linear system is discretised exactly (local linearisation: Ozaki
// 1992), which stays stable however stiff the law or long the step. The number of steps is bounded: very long
// gaps take longer steps.
#include "engine/motion.h"

#include <algorithm>
#include <cmath>

#include "engine/cholesky.h"
#include "engine/time.h"

namespace steelyard::engine {
namespace {

constexpr double kStepsPerResponse = 20.0;
constexpr int kMaxSteps = 200;

bool all_affine(const Model& model) {
  return std::all_of(model.states.begin(), model.states.end(),
                     [](const StateModel& s) { return std::holds_alternative<AffineForm>(s.rate); });
}

}  // namespace

Motion::Motion(const Model& model, const Layout& layout)
    : model_(model), layout_(layout), affine_(all_affine(model)) {
  const int n = layout.core;
  rate_.setZero(n, n);
  drive_.setZero(n);
  unrest_density_.setZero(n);
  for (int i = 0; i < layout.states; ++i) {
    const auto& state = model.states[static_cast<std::size_t>(i)];
    unrest_density_(i) = state.unrest * state.unrest;
    const auto* affine = std::get_if<AffineForm>(&state.rate);
    if (!affine) continue;
    for (int k = 0; k < layout.states; ++k) rate_(i, k) = affine->on_states[static_cast<std::size_t>(k)];
    for (int k = layout.states; k < n; ++k)
      rate_(i, k) = affine->on_inputs[static_cast<std::size_t>(k - layout.states)];
    drive_(i) = affine->constant;
  }
  const double still = model.still.times * model.still.times;
  mode_factor_ = {still * still, still, 1.0, model.jolt.times * model.jolt.times};
  rows_.resize(static_cast<std::size_t>(n * layout.max_dim));
}

void Motion::prepare(TimeNs from_ns, TimeNs to_ns, unsigned unknown_inputs) {
  from_ns_ = from_ns;
  const TimeNs length_ns = to_ns - from_ns;
  gap_s_ = seconds(length_ns);
  unknown_ = unknown_inputs;
  for (std::size_t j = 0; j < model_.channels.size(); ++j)
    colour_keeps_[j] = correlation_over(model_.channels[j], gap_s_);
  if (!affine_) return;
  for (const auto& gap : cache_) {
    if (gap.length_ns != length_ns || gap.unknown != unknown_) continue;
    affine_gap_ = &gap;
    return;
  }
  Gap& gap = cache_[static_cast<std::size_t>(next_in_cache_)];
  next_in_cache_ = (next_in_cache_ + 1) % static_cast<int>(cache_.size());
  fill(gap, rate_, drive_, gap_s_);
  gap.length_ns = length_ns;
  gap.unknown = unknown_;
  affine_gap_ = &gap;
}

// Discretises with the unknown inputs' pull to the middle of their range added.
void Motion::fill(Gap& gap, const CoreMatrix& rate, const CoreVector& drive, double dt_s) const {
  LinearSystem system{rate, drive, unrest_density_};
  CoreVector input_density = CoreVector::Zero(layout_.core);
  const double pull = 1.0 / model_.response_s;
  for (int i = layout_.states; i < layout_.core; ++i) {
    const auto k = static_cast<std::size_t>(i - layout_.states);
    if (!(unknown_ >> k & 1U)) continue;
    const auto& input = model_.inputs[k];
    const double width = input.hi - input.lo;
    system.rate(i, i) = -pull;
    system.drive(i) = pull * 0.5 * (input.lo + input.hi);
    input_density(i) = 2.0 * pull * width * width / 12.0;
  }
  discretise(system, dt_s, gap.move);
  gap.has_input_noise = unknown_ != 0;
  if (!gap.has_input_noise) return;
  system.density = input_density;
  Transition moved;
  discretise(system, dt_s, moved);
  gap.input_noise = moved.noise;
}

void Motion::rates(const CoreVector& v, double time_s, CoreVector& out) const {
  out.resize(layout_.core);
  const auto n = static_cast<std::size_t>(layout_.states);
  const auto k = static_cast<std::size_t>(layout_.core - layout_.states);
  for (std::size_t i = 0; i < n; ++i)
    out(static_cast<Eigen::Index>(i)) =
        law_value(model_.states[i].rate, {v.data(), n}, {v.data() + n, k}, time_s);
  for (std::size_t i = 0; i < k; ++i) {
    out(static_cast<Eigen::Index>(n + i)) = 0.0;  // held; fill() adds the pull of unknown ones
  }
}

// Fills local_ with one step of the law as the hypothesis's Gaussian sees it.
void Motion::linearise(const Hypothesis& h, double time_s, double dt_s) {
  const int n = layout_.core;
  const CoreGaussian core(h, n);
  const CoreVector& mean = core.mean;
  const CoreMatrix& root = core.root;
  CoreMatrix slope(n, n);
  CoreVector drive = CoreVector::Zero(n);
  CoreVector up(n);
  CoreVector down(n);
  // Where a law has no value (the root of a level below zero), the mean's stands in, and rest for that.
  CoreVector centre(n);
  rates(mean, time_s, centre);
  centre = centre.unaryExpr([](double v) { return std::isfinite(v) ? v : 0.0; });
  const auto stand_in = [&](CoreVector& v) {
    for (int i = 0; i < n; ++i)
      if (!std::isfinite(v(i))) v(i) = centre(i);
  };
  const double reach = std::sqrt(static_cast<double>(n));
  for (int k = 0; k < n; ++k) {
    rates(mean + reach * root.col(k), time_s, up);
    rates(mean - reach * root.col(k), time_s, down);
    stand_in(up);
    stand_in(down);
    slope.col(k) = (up - down) / (2.0 * reach);
    drive += (up + down) / (2.0 * n);
  }
  for (int i = 0; i < n; ++i) divide_by_lower(slope.row(i), root);
  drive -= CoreVector(slope.lazyProduct(mean));
  fill(local_, slope, drive, dt_s);
}

void Motion::move(std::span<Hypothesis> group, const Gap& gap, const Trail& trail) {
  for (Hypothesis& h : group) apply(h, gap);
  for (Hypothesis& h : trail.shadows) apply(h, gap);
  if (trail.transition) *trail.transition = CoreMatrix(gap.move.transition.lazyProduct(*trail.transition));
}

void Motion::predict(std::span<Hypothesis> group, const Walks& walks, const Trail& trail) {
  if (affine_) {
    move(group, *affine_gap_, trail);
  } else {
    const double wanted = std::ceil(gap_s_ * kStepsPerResponse / model_.response_s);
    const int steps = static_cast<int>(std::clamp(wanted, 1.0, static_cast<double>(kMaxSteps)));
    const double dt_s = gap_s_ / steps;
    // One regression, about the heaviest, serves all modes: they differ little in where they believe the
    // machine.
    const auto heaviest = std::max_element(
        group.begin(), group.end(),
        [](const Hypothesis& a, const Hypothesis& b) { return a.log_weight < b.log_weight; });
    for (int i = 0; i < steps; ++i) {
      linearise(*heaviest, seconds(from_ns_) + dt_s * i, dt_s);
      move(group, local_, trail);
    }
  }
  for (Hypothesis& h : group) walk(h, walks);
  for (Hypothesis& h : trail.shadows) walk(h, walks);
}

void Motion::walk(Hypothesis& h, const Walks& walks) const {
  for (int j = 0; j < layout_.channels; ++j) {
    const auto u = static_cast<std::size_t>(j);
    if (layout_.colour_at[u] >= 0) fade(h, layout_.colour_at[u], colour_keeps_[u]);
    const int own = h.own_at[u];
    if (own < 0) continue;
    const Condition condition = h.conditions.of(j);
    const int parts = layout_.part_count[u];
    const double time_s = learns_speed(condition) ? gap_s_ / h.walk[j].mean() : gap_s_;
    for (int i = 0; i < parts; ++i) {
      const auto p = static_cast<std::size_t>(layout_.first_part[u] + i);
      if (has_rate(condition)) drift(h, own + i, own + parts + i, walks.rate[p]);
      h.p(own + i, own + i) += walks.own[static_cast<std::size_t>(condition)][p] * time_s;
    }
  }
}

// Correlated noise decays towards nothing; what is new of it comes with the next reading (likelihood.cc).
void Motion::fade(Hypothesis& h, int at, double keeps) {
  h.mean[at] *= keeps;
  for (int k = 0; k < h.dim; ++k) h.p(at, k) *= keeps;
  for (int k = 0; k < h.dim; ++k) h.p(k, at) *= keeps;
}

// o moves by its rate, and the rate by white noise: the discretisation is that of constant velocity with
// white acceleration.
void Motion::drift(Hypothesis& h, int at, int rate, double rate_density) const {
  const double dt = gap_s_;
  h.mean[at] += dt * h.mean[rate];
  for (int k = 0; k < h.dim; ++k) h.p(at, k) += dt * h.p(rate, k);
  for (int k = 0; k < h.dim; ++k) h.p(k, at) += dt * h.p(k, rate);
  h.p(at, at) += rate_density * dt * dt * dt / 3.0;
  h.p(at, rate) += rate_density * dt * dt / 2.0;
  h.p(rate, at) += rate_density * dt * dt / 2.0;
  h.p(rate, rate) += rate_density * dt;
}

void Motion::apply(Hypothesis& h, const Gap& gap) {
  const double mode_factor = mode_factor_[static_cast<std::size_t>(h.mode)];
  const int n = layout_.core;
  const int d = h.dim;
  const CoreMatrix& f = gap.move.transition;
  CoreVector mean = gap.move.shift;
  std::fill(rows_.begin(), rows_.begin() + n * d, 0.0);
  for (int i = 0; i < n; ++i) {
    double* row = rows_.data() + i * d;
    for (int k = 0; k < n; ++k) {
      const double fik = f(i, k);
      if (fik == 0.0) continue;
      mean(i) += fik * h.mean[k];
      const double* from = h.cov + k * d;
      for (int c = 0; c < d; ++c) row[c] += fik * from[c];
    }
  }
  for (int i = 0; i < n; ++i) {
    const double* row = rows_.data() + i * d;
    for (int k = 0; k <= i; ++k) {
      double sum = mode_factor * gap.move.noise(i, k);
      if (gap.has_input_noise) sum += gap.input_noise(i, k);
      for (int c = 0; c < n; ++c) sum += f(k, c) * row[c];
      h.p(i, k) = sum;
      h.p(k, i) = sum;
    }
    for (int c = n; c < d; ++c) {
      h.p(i, c) = row[c];
      h.p(c, i) = row[c];
    }
    h.mean[i] = mean(i);
  }
}

}  // namespace steelyard::engine
