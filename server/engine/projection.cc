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

double Projection::along(const double* with) const {
  double sum = 0.0;
  for (int i = 0; i < slope.size(); ++i) sum += slope(i) * with[i];
  for (const int at : ones)
    if (at >= 0) sum += with[at];
  return sum;
}

double Projector::spec_variance(const Hypothesis& h, int channel, int part, double time_s) const {
  const auto& c = model_.channels[static_cast<std::size_t>(channel)].part(part);
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

void Projector::read_slope(const Hypothesis& h, const ChannelModel& channel, const PartModel& part,
                           double time_s, Projection& out) const {
  if (const auto* formula = std::get_if<std::shared_ptr<Formula>>(&part.reads))
    return regress(h, **formula, channel.modulo, time_s, out);
  const auto& affine = std::get<AffineForm>(part.reads);
  const auto n = static_cast<std::size_t>(layout_.states);
  out.slope.resize(layout_.core);
  out.mean = affine.constant;
  for (int i = 0; i < layout_.core; ++i) {
    const auto u = static_cast<std::size_t>(i);
    out.slope(i) = u < n ? affine.on_states[u] : affine.on_inputs[u - n];
    out.mean += out.slope(i) * h.mean[i];
  }
}

// A reading that was taken a little earlier or later than its stamp is off by its rate times that.
double Projector::variance_by_time(const Hypothesis& h, double time_s, double time_sd_s,
                                   const Projection& out) const {
  const auto n = static_cast<std::size_t>(layout_.states);
  const auto k = static_cast<std::size_t>(layout_.core - layout_.states);
  double rate = 0.0;
  for (std::size_t i = 0; i < n; ++i) {
    const double slope = out.slope(static_cast<Eigen::Index>(i));
    if (slope != 0.0) rate += slope * law_value(model_.states[i].rate, {h.mean, n}, {h.mean + n, k}, time_s);
  }
  const double off = rate * time_sd_s;
  return std::isfinite(off) ? off * off : 0.0;
}

void Projector::project(const Hypothesis& h, int channel, int part, Condition condition, double time_s,
                        Projection& out) const {
  const auto j = static_cast<std::size_t>(channel);
  const auto& c = model_.channels[j];
  const int d = h.dim;
  out.spec_variance = spec_variance(h, channel, part, time_s);
  out.mean = 0.0;
  out.variance = 0.0;
  out.ones.fill(-1);
  const int own = h.own_at[j] + part;
  if (condition == Condition::kStuck) {
    out.slope.resize(0);
    out.mean = h.mean[own];
    for (int i = 0; i < d; ++i) out.column[static_cast<std::size_t>(i)] = h.p(own, i);
    out.variance = (1.0 + kRounding) * h.p(own, own);
    out.ones[2] = own;
    return;
  }
  read_slope(h, c, c.part(part), time_s, out);
  if (c.time_sd_s > 0.0) out.spec_variance += variance_by_time(h, time_s, c.time_sd_s, out);
  out.ones = {layout_.bias_at[static_cast<std::size_t>(layout_.first_part[j] + part)], layout_.colour_at[j],
              is_walk(condition) ? own : -1};
  std::fill_n(out.column.begin(), d, 0.0);
  const auto add_row = [&](int at, double weight) {
    const double* row = h.cov + at * d;
    for (int i = 0; i < d; ++i) out.column[static_cast<std::size_t>(i)] += weight * row[i];
  };
  double sizes = 0.0;
  for (int i = 0; i < layout_.core; ++i) {
    if (out.slope(i) == 0.0) continue;
    add_row(i, out.slope(i));
    sizes += out.slope(i) * out.slope(i) * h.p(i, i);
  }
  for (const int at : out.ones) {
    if (at < 0) continue;
    add_row(at, 1.0);
    out.mean += h.mean[at];
    sizes += h.p(at, at);
  }
  out.variance = std::max(out.variance + out.along(out.column.data()), 0.0) + kRounding * sizes;
}

}  // namespace steelyard::engine
