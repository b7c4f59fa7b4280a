// SPDX-License-Identifier: Apache-2.0
// Vector channels (engine.md §4, last paragraph). Sizes are bounded by kMaxParts: nothing is allocated.
#include "engine/vector_reading.h"

#include <algorithm>
#include <boost/math/special_functions/gamma.hpp>
#include <cmath>
#include <numbers>

#include "engine/likelihood.h"
#include "engine/normal.h"
#include "engine/repeats.h"

namespace steelyard::engine {
namespace {

constexpr int kFixedPointSteps = 8;
constexpr double kFixedPointTolerance = 1e-2;
using Policy = boost::math::policies::policy<boost::math::policies::promote_double<false>>;

PartsMatrix product(const PartsMatrix& a, const PartsMatrix& b) { return a.lazyProduct(b); }

PartsMatrix inverse(const PartsMatrix& symmetric) {
  const PartsMatrix one = PartsMatrix::Identity(symmetric.rows(), symmetric.cols());
  const PartsMatrix out = symmetric.llt().solve(one);
  return 0.5 * (out + out.transpose());
}

double log_determinant(const Eigen::LLT<PartsMatrix>& llt) {
  double sum = 0.0;
  for (Eigen::Index i = 0; i < llt.rows(); ++i) sum += std::log(llt.matrixLLT()(i, i));
  return 2.0 * sum;
}

double log_normal(const PartsVector& e, const PartsMatrix& covariance) {
  const Eigen::LLT<PartsMatrix> llt(covariance);
  const PartsVector z = llt.matrixL().solve(e);
  const double d = static_cast<double>(e.size());
  return -0.5 * (z.squaredNorm() + log_determinant(llt) + d * std::log(2.0 * std::numbers::pi));
}

// Multivariate Student t with 2a degrees of freedom.
double log_student_t(const PartsVector& e, double a, const PartsMatrix& scale) {
  const Eigen::LLT<PartsMatrix> llt(scale);
  const PartsVector z = llt.matrixL().solve(e);
  const double d = static_cast<double>(e.size());
  return boost::math::lgamma(a + 0.5 * d, Policy()) - boost::math::lgamma(a, Policy()) -
         0.5 * (d * std::log(2.0 * a * std::numbers::pi) + log_determinant(llt)) -
         (a + 0.5 * d) * std::log1p(z.squaredNorm() / (2.0 * a));
}

double variance_shape(double a, Eigen::Index parts) { return a - 0.5 * static_cast<double>(parts - 1); }

}  // namespace

Eigen::MatrixXd part_correlations(const ChannelModel& channel) {
  Eigen::MatrixXd m = Eigen::MatrixXd::Identity(channel.parts(), channel.parts());
  std::size_t next = 0;
  for (int i = 0; i < channel.parts() && !channel.part_correlation.empty(); ++i)
    for (int k = i + 1; k < channel.parts(); ++k) m(i, k) = m(k, i) = channel.part_correlation[next++];
  return m;
}

double prior_shape(const ChannelModel& channel) {
  return 0.5 * (channel.prior_readings + static_cast<double>(channel.parts() - 1));
}

VectorReading::VectorReading(const Model& model, const Layout& layout, const Projector& projector)
    : model_(model), layout_(layout), projector_(projector) {
  for (std::size_t j = 0; j < model.channels.size(); ++j) {
    const auto& c = model.channels[j];
    if (c.parts() == 1) continue;
    const PartsMatrix correlation = part_correlations(c);
    correlation_root_[j] = correlation.llt().matrixL();
  }
}

PartsMatrix VectorReading::mean_precision(const Hypothesis& h, int channel) const {
  const auto j = static_cast<std::size_t>(channel);
  const int d = layout_.part_count[j];
  return Eigen::Map<const Eigen::MatrixXd>(h.shape + layout_.shape_at[j], d, d);
}

// 1 / K in the directions of the mean's eigenvectors, each as for a scalar channel.
PartsMatrix VectorReading::relative_noise(const PartsMatrix& mean, double a, bool capped) {
  const Eigen::SelfAdjointEigenSolver<PartsMatrix> eigen(mean);
  const double shape = variance_shape(a, mean.rows());
  PartsVector variance(mean.rows());
  for (Eigen::Index i = 0; i < mean.rows(); ++i) {
    const double level = std::max(eigen.eigenvalues()(i), 1e-300);
    variance(i) = 1.0 / (capped ? mean_below_one({shape, shape / level}) : level);
  }
  const PartsMatrix scaled = eigen.eigenvectors() * variance.asDiagonal();
  return product(scaled, eigen.eigenvectors().transpose());
}

PartsMatrix VectorReading::noise(const PartsMatrix& relative) const {
  return product(product(spec_root_, relative), spec_root_.transpose());
}

PartsMatrix VectorReading::expected_noise(const Hypothesis& h, int channel) const {
  if (!model_.options.learn_precision) return noise(PartsMatrix::Identity(parts_, parts_));
  return noise(relative_noise(mean_precision(h, channel), h.noise[channel].a, model_.options.cap_precision));
}

void VectorReading::expect(const Hypothesis& h, const Occasion& o, Condition condition) {
  const auto j = static_cast<std::size_t>(o.channel);
  parts_ = layout_.part_count[j];
  innovation_.resize(parts_);
  spread_.resize(parts_, parts_);
  spec_root_ = correlation_root_[j];
  for (int i = 0; i < parts_; ++i) {
    Projection& p = expected_[static_cast<std::size_t>(i)];
    projector_.project(h, o.channel, i, condition, o.time_s, p);
    innovation_(i) =
        o.loose >> static_cast<unsigned>(i) & 1U ? 0.0 : o.values[static_cast<std::size_t>(i)] - p.mean;
    spec_root_.row(i) *= std::sqrt(p.spec_variance);
    for (int k = 0; k < i; ++k)
      spread_(i, k) = spread_(k, i) = p.along(expected_[static_cast<std::size_t>(k)].column.data());
    spread_(i, i) = p.variance;
  }
}

bool VectorReading::known() const {
  return std::all_of(expected_.begin(), expected_.begin() + parts_,
                     [](const Projection& p) { return p.known(); });
}

double VectorReading::log_regular(double a, const PartsMatrix& total) const {
  if (!model_.options.learn_precision) return log_normal(innovation_, total);
  return log_student_t(innovation_, variance_shape(a, total.rows()), total);
}

double VectorReading::repeat_probability(const Occasion& o, const PartsMatrix& total) const {
  double inside = 1.0;
  for (int i = 0; i < parts_; ++i) {
    const auto u = static_cast<std::size_t>(i);
    inside *= bin_probability(o.last_values[u] - expected_[u].mean, std::sqrt(total(i, i)),
                              effective_resolution(channel(o.channel).part(i)));
  }
  return o.regular * inside + (1.0 - o.regular) * o.resolution / o.span;
}

// The variational fixed point of noise and gain (Agamennoni, Nieto & Nebot 2012 give it for matrices).
PartsMatrix VectorReading::learn(Hypothesis& h, const Occasion& o, PartsMatrix r, double weight) const {
  if (!model_.options.learn_precision || o.loose != 0) return r;
  const auto j = static_cast<std::size_t>(o.channel);
  const PartsMatrix mean = mean_precision(h, o.channel);
  const double a = h.noise[o.channel].a;
  const PartsMatrix before = 2.0 * a * inverse(mean);
  PartsMatrix next = mean;
  for (int i = 0; i < kFixedPointSteps; ++i) {
    const PartsMatrix gain = product(spread_, inverse(spread_ + r));
    const PartsVector left = innovation_ - PartsVector(gain.lazyProduct(innovation_));
    PartsMatrix squared = spread_ - product(gain, spread_) + PartsMatrix(left.lazyProduct(left.transpose()));
    squared = spec_root_.triangularView<Eigen::Lower>().solve(squared);
    squared = spec_root_.triangularView<Eigen::Lower>().solve(PartsMatrix(squared.transpose()));
    const PartsMatrix gathered = before + 0.5 * weight * (squared + squared.transpose());
    next = (2.0 * a + weight) * inverse(gathered);
    const PartsVector was = r.diagonal();
    r = noise(relative_noise(next, a + 0.5 * weight, model_.options.cap_precision));
    if (((r.diagonal() - was).array().abs() <= kFixedPointTolerance * was.array()).all()) break;
  }
  h.noise[o.channel].a = h.noise[o.channel].b = a + 0.5 * weight;
  Eigen::Map<Eigen::MatrixXd>(h.shape + layout_.shape_at[j], parts_, parts_) = next;
  return r;
}

// Moments of the mixture of the updated and the untouched Gaussian; returns the degrees of freedom for
// signal.
double VectorReading::move(Hypothesis& h, const PartsMatrix& total, double weight) {
  const PartsMatrix precision = inverse(total);
  const PartsVector pull = precision.lazyProduct(innovation_);
  double freedom = 0.0;
  for (int i = 0; i < parts_; ++i) {
    Projection& p = expected_[static_cast<std::size_t>(i)];
    for (int k = 0; k < h.dim; ++k)
      if (double& c = p.column[static_cast<std::size_t>(k)]; c * c > h.p(k, k) * total(i, i)) c = 0.0;
    for (int k = 0; k < layout_.states && k < p.slope.size(); ++k)
      for (int l = 0; l < parts_; ++l)
        freedom += p.slope(k) * expected_[static_cast<std::size_t>(l)].column[static_cast<std::size_t>(k)] *
                   precision(l, i);
  }
  const PartsMatrix change =
      -weight * precision + weight * (1.0 - weight) * PartsMatrix(pull.lazyProduct(pull.transpose()));
  for (int i = 0; i < h.dim; ++i) {
    PartsVector row = PartsVector::Zero(parts_);
    double shift = 0.0;
    for (int p = 0; p < parts_; ++p) {
      const double c = expected_[static_cast<std::size_t>(p)].column[static_cast<std::size_t>(i)];
      shift += c * pull(p);
      row += c * change.col(p);
    }
    h.mean[i] += weight * shift;
    for (int k = 0; k <= i; ++k) {
      double sum = 0.0;
      for (int p = 0; p < parts_; ++p)
        sum += row(p) * expected_[static_cast<std::size_t>(p)].column[static_cast<std::size_t>(k)];
      h.p(i, k) += sum;
      h.p(k, i) = h.p(i, k);
    }
  }
  return weight * freedom;
}

Absorbed VectorReading::absorb(Hypothesis& h, const Occasion& o) {
  expect(h, o, h.conditions.of(o.channel));
  Absorbed out;
  out.log_likelihood = std::log(o.elsewhere);
  if (!known()) return out;
  const double a = h.noise[o.channel].a;
  PartsMatrix r = expected_noise(h, o.channel);
  PartsMatrix blur = PartsMatrix::Zero(parts_, parts_);
  for (int i = 0; i < parts_; ++i) {
    const double span = channel(o.channel).part(i).hi - channel(o.channel).part(i).lo;
    if (o.loose >> static_cast<unsigned>(i) & 1U) blur(i, i) = span * span;
  }
  const PartsMatrix total = spread_ + r + blur;
  const double log_inside = std::log(o.regular) + log_regular(a, total);
  out.log_likelihood =
      o.regular < 1.0 ? log_sum(log_inside, std::log((1.0 - o.regular) * o.elsewhere)) : log_inside;
  if (!o.first) out.repeat_probability = repeat_probability(o, total);
  const double weight = std::exp(log_inside - out.log_likelihood);
  r = learn(h, o, r, weight);
  out.influence = move(h, spread_ + r + blur, weight);
  return out;
}

double VectorReading::begin_offset(Hypothesis& h, const Occasion& o) {
  expect(h, o, Condition::kSound);
  if (!known()) return NAN;
  const PartsMatrix total = spread_ + expected_noise(h, o.channel);
  const int old = h.dim;
  const int at = add_own(h, o.channel, parts_);
  PartsMatrix wide = total;
  for (int i = 0; i < parts_; ++i) {
    const double size = channel(o.channel).part(i).offset_size;
    wide(i, i) += size * size;
    h.mean[at + i] = innovation_(i);
    for (int k = 0; k < old; ++k) {
      const int to = k < at ? k : k + parts_;
      h.p(at + i, to) = -expected_[static_cast<std::size_t>(i)].column[static_cast<std::size_t>(k)];
      h.p(to, at + i) = h.p(at + i, to);
    }
    for (int k = 0; k < parts_; ++k) h.p(at + i, at + k) = total(i, k);
  }
  return log_normal(innovation_, wide);
}

void VectorReading::begin_level(Hypothesis& h, const Occasion& o) {
  const int parts = layout_.part_count[static_cast<std::size_t>(o.channel)];
  const int at = add_own(h, o.channel, parts);
  for (int i = 0; i < parts; ++i) {
    h.mean[at + i] = o.values[static_cast<std::size_t>(i)];
    h.p(at + i, at + i) = projector_.spec_variance(h, o.channel, i, o.time_s);
  }
}

void VectorReading::forget(Hypothesis& h, int channel, double keep) const {
  const auto j = static_cast<std::size_t>(channel);
  const int d = layout_.part_count[j];
  const double a0 = prior_shape(model_.channels[j]);
  const double a = h.noise[channel].a;
  const PartsMatrix prior = 2.0 * a0 * PartsMatrix::Identity(d, d);
  const PartsMatrix scatter = 2.0 * a * inverse(mean_precision(h, channel));
  const double left = a0 + keep * (a - a0);
  h.noise[channel] = {left, left};
  Eigen::Map<Eigen::MatrixXd>(h.shape + layout_.shape_at[j], d, d) =
      2.0 * left * inverse(prior + keep * (scatter - prior));
}

void VectorReading::start_noise(Hypothesis& h, int channel) const {
  const auto j = static_cast<std::size_t>(channel);
  const int d = layout_.part_count[j];
  const double a0 = prior_shape(model_.channels[j]);
  h.noise[channel] = {a0, a0};
  Eigen::Map<Eigen::MatrixXd>(h.shape + layout_.shape_at[j], d, d).setIdentity();
}

void VectorReading::start_noise(Hypothesis& h, int channel, double shape, std::span<const double> variance,
                                double time_s) const {
  start_noise(h, channel);
  const auto j = static_cast<std::size_t>(channel);
  const int d = layout_.part_count[j];
  h.noise[channel].a = h.noise[channel].b = shape + 0.5 * (d - 1);
  Eigen::Map<Eigen::MatrixXd> mean(h.shape + layout_.shape_at[j], d, d);
  for (int i = 0; i < d; ++i)
    mean(i, i) =
        1.0 / (1.0 + variance[static_cast<std::size_t>(i)] / projector_.spec_variance(h, channel, i, time_s));
}

double VectorReading::level(double a, const PartsMatrix& mean) {
  const Eigen::SelfAdjointEigenSolver<PartsMatrix> eigen(mean, Eigen::EigenvaluesOnly);
  const double shape = variance_shape(a, mean.rows());
  return mean_of_min_with_one({shape, shape / std::max(eigen.eigenvalues()(0), 1e-300)});
}

void VectorReading::relative_variance(int channel, double a, const PartsMatrix& mean,
                                      PartsVector& out) const {
  const PartsMatrix& root = correlation_root_[static_cast<std::size_t>(channel)];
  out = product(product(root, relative_noise(mean, a, false)), root.transpose()).diagonal();
}

}  // namespace steelyard::engine
