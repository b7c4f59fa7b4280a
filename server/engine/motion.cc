// SPDX-License-Identifier: Apache-2.0
// Prediction. An affine law moves by its exact discretisation, cached by gap. Any other law moves by
// statistical linear regression over sigma points (cubature points: Arasaratnam & Haykin 2009; regression
// view: Lefebvre, Bruyninckx & De Schutter 2002), process noise by discretising the Jacobian at the mean.
// Very long gaps use local linearisation steps (Ozaki 1992), whose number is bounded.
#include "engine/motion.h"

#include <algorithm>
#include <cmath>

#include "engine/cholesky.h"

namespace steelyard::engine {
namespace {

constexpr double kStepsPerResponse = 20.0;
constexpr int kMaxSteps = 200;
constexpr double kSigmaPointResponses = 10.0;  // longer gaps: sigma points buy nothing, stiffness costs

double seconds(TimeNs ns) { return static_cast<double>(ns) * 1e-9; }

bool all_affine(const Model& model) {
  return std::all_of(model.states.begin(), model.states.end(),
                     [](const StateModel& s) { return std::holds_alternative<AffineForm>(s.rate); });
}

double law_value(const Law& law, const double* states, std::size_t n, const double* inputs, std::size_t k,
                 double time_s) {
  if (const auto* affine = std::get_if<AffineForm>(&law)) {
    double sum = affine->constant;
    for (std::size_t i = 0; i < n; ++i) sum += affine->on_states[i] * states[i];
    for (std::size_t i = 0; i < k; ++i) sum += affine->on_inputs[i] * inputs[i];
    return sum;
  }
  return std::get<std::shared_ptr<Formula>>(law)->evaluate({states, n}, {inputs, k}, time_s);
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
  mode_factor_ = {model.still.times * model.still.times, 1.0, model.jolt.times * model.jolt.times};
  rows_.resize(static_cast<std::size_t>(n * layout.max_dim));
}

void Motion::prepare(TimeNs from_ns, TimeNs to_ns, unsigned unknown_inputs) {
  from_ns_ = from_ns;
  gap_ns_ = to_ns - from_ns;
  gap_s_ = seconds(gap_ns_);
  unknown_ = unknown_inputs;
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

const Motion::Gap& Motion::affine_gap() {
  for (const auto& gap : cache_)
    if (gap.length_ns == gap_ns_ && gap.unknown == unknown_) return gap;
  Gap& gap = cache_[static_cast<std::size_t>(next_in_cache_)];
  next_in_cache_ = (next_in_cache_ + 1) % static_cast<int>(cache_.size());
  fill(gap, rate_, drive_, gap_s_);
  gap.length_ns = gap_ns_;
  gap.unknown = unknown_;
  return gap;
}

void Motion::rates(const CoreVector& v, double time_s, CoreVector& out) const {
  out.resize(layout_.core);
  const auto n = static_cast<std::size_t>(layout_.states);
  const auto k = static_cast<std::size_t>(layout_.core - layout_.states);
  for (std::size_t i = 0; i < n; ++i)
    out(static_cast<Eigen::Index>(i)) =
        law_value(model_.states[i].rate, v.data(), n, v.data() + n, k, time_s);
  for (std::size_t i = 0; i < k; ++i) {
    const auto& input = model_.inputs[i];
    const auto at = static_cast<Eigen::Index>(n + i);
    out(at) = unknown_ >> i & 1U ? (0.5 * (input.lo + input.hi) - v(at)) / model_.response_s : 0.0;
  }
}

void Motion::jacobian(const CoreVector& v, double time_s, CoreMatrix& out) const {
  const int n = layout_.core;
  out.resize(n, n);
  CoreVector above(n);
  CoreVector below(n);
  for (int k = 0; k < n; ++k) {
    const double step = 1e-6 * std::max(std::fabs(v(k)), 1.0);
    CoreVector moved = v;
    moved(k) = v(k) + step;
    rates(moved, time_s, above);
    moved(k) = v(k) - step;
    rates(moved, time_s, below);
    out.col(k) = (above - below) / (2.0 * step);
  }
}

// Classical Runge–Kutta (Kutta 1901) over the gap.
void Motion::flow(CoreVector& v) const {
  const double wanted = std::ceil(gap_s_ * kStepsPerResponse / model_.response_s);
  const int steps = std::clamp(static_cast<int>(std::min(wanted, 1e6)), 1, kMaxSteps);
  const double h = gap_s_ / steps;
  CoreVector k1;
  CoreVector k2;
  CoreVector k3;
  CoreVector k4;
  for (int i = 0; i < steps; ++i) {
    const double t = seconds(from_ns_) + h * i;
    rates(v, t, k1);
    rates(v + 0.5 * h * k1, t + 0.5 * h, k2);
    rates(v + 0.5 * h * k2, t + 0.5 * h, k3);
    rates(v + h * k3, t + h, k4);
    v += (h / 6.0) * (k1 + 2.0 * k2 + 2.0 * k3 + k4);
  }
}

// Fills own_ so that apply() moves the hypothesis: transition by regression over sigma points, noise by the
// Jacobian's discretisation plus what the regression leaves unexplained, shift so that the mean comes out
// right.
void Motion::nonlinear_gap(const Hypothesis& h, double mode_factor) {
  const int n = layout_.core;
  CoreVector mean(n);
  CoreMatrix cov(n, n);
  for (int i = 0; i < n; ++i) {
    mean(i) = h.mean[i];
    for (int k = 0; k < n; ++k) cov(i, k) = h.p(i, k);
  }
  if (gap_s_ > kSigmaPointResponses * model_.response_s) return long_gap(mean, mode_factor);
  CoreMatrix root;
  cholesky(cov, root);
  CoreMatrix up(n, n);
  CoreMatrix down(n, n);
  moved_mean_.setZero(n);
  const double reach = std::sqrt(static_cast<double>(n));
  for (int k = 0; k < n; ++k) {
    CoreVector a = mean + reach * root.col(k);
    CoreVector b = mean - reach * root.col(k);
    flow(a);
    flow(b);
    up.col(k) = a;
    down.col(k) = b;
    moved_mean_ += (a + b) / (2.0 * n);
  }
  CoreMatrix slope = (up - down) / (2.0 * reach);
  CoreMatrix rate;
  jacobian(mean, seconds(from_ns_), rate);
  fill(own_, rate, CoreVector::Zero(n), gap_s_);
  // Unexplained by the regression: the spread of the pairs' midpoints, which is the even part of the law.
  CoreMatrix bend = 0.5 * (up + down);
  bend.colwise() -= moved_mean_;
  CoreMatrix residual = bend.lazyProduct(bend.transpose()) / static_cast<double>(n);
  own_.input_noise = own_.has_input_noise ? CoreMatrix(own_.input_noise + residual) : residual;
  own_.has_input_noise = true;
  for (int i = 0; i < n; ++i) divide_by_lower(slope.row(i), root);
  own_.move.transition = slope;
  own_.move.shift = moved_mean_ - CoreVector(slope.lazyProduct(mean));
}

void Motion::long_gap(const CoreVector& mean, double mode_factor) {
  const int n = layout_.core;
  const double h = gap_s_ / kMaxSteps;
  CoreVector v = mean;
  CoreMatrix f = CoreMatrix::Identity(n, n);
  CoreMatrix q = CoreMatrix::Zero(n, n);
  CoreMatrix rate;
  CoreVector drive(n);
  for (int i = 0; i < kMaxSteps; ++i) {
    const double t = seconds(from_ns_) + h * i;
    jacobian(v, t, rate);
    rates(v, t, drive);
    drive -= CoreVector(rate.lazyProduct(v));
    fill(own_, rate, drive, h);
    const CoreMatrix& step = own_.move.transition;
    v = CoreVector(step.lazyProduct(v)) + own_.move.shift;
    f = CoreMatrix(step.lazyProduct(f));
    CoreMatrix sq = step.lazyProduct(q);
    q = CoreMatrix(sq.lazyProduct(step.transpose())) + mode_factor * own_.move.noise;
    if (own_.has_input_noise) q += own_.input_noise;
  }
  own_.move.transition = f;
  own_.move.shift = v - CoreVector(f.lazyProduct(mean));
  own_.move.noise.setZero(n, n);
  own_.input_noise = q;
  own_.has_input_noise = true;
}

void Motion::predict(Hypothesis& h, const WalkDensity& walk_density) {
  const double factor = mode_factor_[static_cast<std::size_t>(h.mode)];
  if (affine_) {
    apply(h, affine_gap(), factor);
  } else {
    nonlinear_gap(h, factor);
    apply(h, own_, factor);
  }
  for (int j = 0; j < layout_.channels; ++j) {
    const int at = h.own_at[static_cast<std::size_t>(j)];
    if (at >= 0)
      h.p(at, at) +=
          walk_density[static_cast<std::size_t>(h.conditions.of(j))][static_cast<std::size_t>(j)] * gap_s_;
  }
}

void Motion::apply(Hypothesis& h, const Gap& gap, double mode_factor) {
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
