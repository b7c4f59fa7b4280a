// SPDX-License-Identifier: Apache-2.0
// Expected readings: exact for affine formulas, by regression over sigma points (as in motion.cc) otherwise.
#include "engine/projection.h"

#include <algorithm>
#include <cmath>

#include "engine/cholesky.h"

namespace steelyard::engine {
namespace {

// The parts of the variance may cancel, and the update takes from them what the reading tells: both leave
// rounding errors of some units in the parts' last place. Counted as spread, they cannot make a variance
// negative or a machine that was left alone for a month certain.
constexpr double kRounding = 1e-15;

}  // namespace

double Projector::spec_variance(const Hypothesis& h, int channel, double time_s) const {
  const auto& c = model_.channels[static_cast<std::size_t>(channel)];
  double sd = c.sd;
  if (c.sd_formula) {
    const auto n = static_cast<std::size_t>(layout_.states);
    const auto k = static_cast<std::size_t>(layout_.core - layout_.states);
    sd = c.sd_formula->evaluate({h.mean, n}, {h.mean + n, k}, time_s);
    // A formula can fail far from where it was checked; the sd at the start state is then the best there is.
    if (!(sd > 0.0) || !std::isfinite(sd)) sd = c.sd;
  }
  return sd * sd + c.resolution * c.resolution / 12.0;
}

void Projector::regress(const Hypothesis& h, Formula& formula, double modulo, double time_s,
                        Projection& out) const {
  const int n = layout_.core;
  const auto states = static_cast<std::size_t>(layout_.states);
  const auto inputs = static_cast<std::size_t>(n) - states;
  const CoreGaussian core(h, n);
  const CoreVector& mean = core.mean;
  const CoreMatrix& root = core.root;
  const auto read = [&](const CoreVector& v) {
    return formula.evaluate({v.data(), states}, {v.data() + states, inputs}, time_s);
  };
  const double centre = read(mean);
  // Where a formula has no value (the root of a level below zero), the centre's stands in.
  const auto about_centre = [&](double value) {
    const double step = value - centre;
    if (!std::isfinite(step)) return 0.0;
    return modulo > 0.0 ? std::remainder(step, modulo) : step;
  };
  const double reach = std::sqrt(static_cast<double>(n));
  std::array<double, kMaxCore> middle{};
  double shift = 0.0;
  out.slope.resize(n);
  for (int k = 0; k < n; ++k) {
    const double up = about_centre(read(mean + reach * root.col(k)));
    const double down = about_centre(read(mean - reach * root.col(k)));
    out.slope(k) = (up - down) / (2.0 * reach);
    middle[static_cast<std::size_t>(k)] = 0.5 * (up + down);
    shift += 0.5 * (up + down) / n;
  }
  out.mean = centre + shift;
  out.variance = 0.0;
  for (int k = 0; k < n; ++k) {
    const double bend = middle[static_cast<std::size_t>(k)] - shift;
    out.variance += bend * bend / n;
  }
  divide_by_lower(out.slope, root);
}

void Projector::project(const Hypothesis& h, int channel, Condition condition, double time_s,
                        Projection& out) const {
  const auto j = static_cast<std::size_t>(channel);
  const auto& c = model_.channels[j];
  const int d = h.dim;
  out.spec_variance = spec_variance(h, channel, time_s);
  out.mean = 0.0;
  out.variance = 0.0;
  const int own = h.own_at[j];
  if (condition == Condition::kStuck) {
    out.slope.resize(0);
    out.mean = h.mean[own];
    for (int i = 0; i < d; ++i) out.column[static_cast<std::size_t>(i)] = h.p(own, i);
    out.variance = (1.0 + kRounding) * h.p(own, own);
    return;
  }
  if (const auto* affine = std::get_if<AffineForm>(&c.reads)) {
    out.slope.resize(layout_.core);
    out.mean = affine->constant;
    for (int i = 0; i < layout_.core; ++i) {
      const auto u = static_cast<std::size_t>(i);
      const auto n = static_cast<std::size_t>(layout_.states);
      out.slope(i) = u < n ? affine->on_states[u] : affine->on_inputs[u - n];
      out.mean += out.slope(i) * h.mean[i];
    }
  } else {
    regress(h, *std::get<std::shared_ptr<Formula>>(c.reads), c.modulo, time_s, out);
  }
  std::fill_n(out.column.begin(), d, 0.0);
  const auto add_row = [&](int at, double weight) {
    const double* row = h.cov + at * d;
    for (int i = 0; i < d; ++i) out.column[static_cast<std::size_t>(i)] += weight * row[i];
  };
  for (int i = 0; i < layout_.core; ++i)
    if (out.slope(i) != 0.0) add_row(i, out.slope(i));
  const int bias = layout_.bias_at[j];
  const bool walks = is_walk(condition);
  if (bias >= 0) add_row(bias, 1.0);
  if (walks) add_row(own, 1.0);
  double parts = 0.0;
  for (int i = 0; i < layout_.core; ++i) {
    out.variance += out.slope(i) * out.column[static_cast<std::size_t>(i)];
    parts += out.slope(i) * out.slope(i) * h.p(i, i);
  }
  if (bias >= 0) {
    out.mean += h.mean[bias];
    out.variance += out.column[static_cast<std::size_t>(bias)];
    parts += h.p(bias, bias);
  }
  if (walks) {
    out.mean += h.mean[own];
    out.variance += out.column[static_cast<std::size_t>(own)];
    parts += h.p(own, own);
  }
  out.variance = std::max(out.variance, 0.0) + kRounding * parts;
}

}  // namespace steelyard::engine
