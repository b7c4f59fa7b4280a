// SPDX-License-Identifier: Apache-2.0
// All that came after the prediction says Λ(x) = N(x; a, A) / N(x; b, B) of the states x, where a, A are
// smoothed and b, B were predicted for all ancestors together. In coordinates u in which B is the identity, b
// is 0 and A is diagonal, Λ = exp(hᵀu − ½ uᵀJu) with J = A⁻¹ − 1 and h = A⁻¹a. An ancestor for which N(u; m,
// S) was predicted has the evidence ∫ N(u; m, S) Λ(u) du = |M|^(−½) exp(hᵀm + ½ hᵀSh − ½ |M^(−½) J^½ (m +
// Sh)|²), M = 1 + J^½ S J^½. If nothing came, J = h = 0 and the evidence is the same for all. Mixtures can be
// wider smoothed than predicted: J is then taken as 0. Checked in tests/engine/settle_test.cc.
#include "engine/settle_evidence.h"

#include <algorithm>
#include <cmath>

#include "engine/cholesky.h"

namespace steelyard::engine {
namespace {

// x ← L⁻¹ x by columns; what has no variance stays out.
template <typename Columns>
void solve_lower(const CoreMatrix& l, Columns& x) {
  for (Eigen::Index i = 0; i < l.rows(); ++i) {
    for (Eigen::Index k = 0; k < i; ++k) x.row(i) -= l(i, k) * x.row(k);
    x.row(i) *= l(i, i) > 0.0 ? 1.0 / l(i, i) : 0.0;
  }
}

void rotate(CoreMatrix& a, CoreMatrix& vectors, Eigen::Index p, Eigen::Index q) {
  const double theta = (a(q, q) - a(p, p)) / (2.0 * a(p, q));
  const double t = std::copysign(1.0, theta) / (std::fabs(theta) + std::sqrt(theta * theta + 1.0));
  const double c = 1.0 / std::sqrt(t * t + 1.0);
  const double s = t * c;
  for (Eigen::Index k = 0; k < a.rows(); ++k) {
    const double x = a(k, p);
    a(k, p) = c * x - s * a(k, q);
    a(k, q) = s * x + c * a(k, q);
    const double v = vectors(k, p);
    vectors(k, p) = c * v - s * vectors(k, q);
    vectors(k, q) = s * v + c * vectors(k, q);
  }
  for (Eigen::Index k = 0; k < a.rows(); ++k) {
    const double x = a(p, k);
    a(p, k) = c * x - s * a(q, k);
    a(q, k) = s * x + c * a(q, k);
  }
}

}  // namespace

void diagonalise(CoreMatrix& symmetric, CoreMatrix& vectors) {
  constexpr int kSweeps = 30;  // five or six are enough
  const auto n = symmetric.rows();
  vectors.setIdentity(n, n);
  for (int sweep = 0; sweep < kSweeps; ++sweep) {
    bool done = true;
    for (Eigen::Index p = 0; p < n; ++p) {
      for (Eigen::Index q = p + 1; q < n; ++q) {
        if (!(std::fabs(symmetric(p, q)) > 1e-15 * (std::fabs(symmetric(p, p)) + std::fabs(symmetric(q, q)))))
          continue;
        rotate(symmetric, vectors, p, q);
        done = false;
      }
    }
    if (done) return;
  }
}

void Evidence::mix(std::span<const Kernel> kernels, std::span<const double> shares) {
  double total = 0.0;
  for (const double s : shares) total += s;
  mean_.setZero(states_);
  for (std::size_t i = 0; i < shares.size(); ++i)
    mean_ += shares[i] / total * Eigen::Map<const Eigen::VectorXd>(kernels[i].expected, states_);
  cov_.setZero(states_, states_);
  for (std::size_t i = 0; i < shares.size(); ++i) {
    const CoreVector step = Eigen::Map<const Eigen::VectorXd>(kernels[i].expected, states_) - mean_;
    cov_ += shares[i] / total * Eigen::Map<const CoreMatrix>(kernels[i].predicted, states_, states_);
    cov_ += shares[i] / total * step * step.transpose();
  }
  cholesky(cov_, root_);
}

void Evidence::whiten(CoreMatrix& cov) const {
  solve_lower(root_, cov);
  cov.transposeInPlace();
  solve_lower(root_, cov);
}

void Evidence::find_message(const double* smoothed_mean, const double* smoothed_cov, int dim) {
  scratch_.resize(states_, states_);
  for (int i = 0; i < states_; ++i)
    for (int k = 0; k < states_; ++k) scratch_(i, k) = smoothed_cov[i * dim + k];
  whiten(scratch_);
  scratch_ = (0.5 * (scratch_ + scratch_.transpose())).eval();
  diagonalise(scratch_, turn_);
  CoreVector a = Eigen::Map<const Eigen::VectorXd>(smoothed_mean, states_) - mean_;
  solve_lower(root_, a);
  slope_ = turn_.transpose().lazyProduct(a);
  precision_.resize(states_);
  for (int i = 0; i < states_; ++i) {
    const double variance = std::clamp(scratch_(i, i), 1e-12, 1.0);
    precision_(i) = root_(i, i) > 0.0 ? std::sqrt(1.0 / variance - 1.0) : 0.0;
    slope_(i) /= variance;
  }
}

double Evidence::log_of(const Kernel& kernel) {
  CoreMatrix s = Eigen::Map<const CoreMatrix>(kernel.predicted, states_, states_);
  whiten(s);
  s = CoreMatrix(turn_.transpose().lazyProduct(s)).lazyProduct(turn_).eval();
  CoreVector m = Eigen::Map<const Eigen::VectorXd>(kernel.expected, states_) - mean_;
  solve_lower(root_, m);
  m = CoreVector(turn_.transpose().lazyProduct(m));
  const CoreVector pull = s.lazyProduct(slope_);
  double log = slope_.dot(m) + 0.5 * slope_.dot(pull);
  CoreMatrix inner = precision_.asDiagonal() * s * precision_.asDiagonal();
  inner.diagonal().array() += 1.0;
  cholesky(inner, scratch_);
  CoreVector rest = precision_.cwiseProduct(m + pull);
  solve_lower(scratch_, rest);
  log -= 0.5 * rest.squaredNorm();
  for (int i = 0; i < states_; ++i) log -= std::log(scratch_(i, i));
  return log;
}

void Evidence::reweigh(std::span<const Kernel> kernels, const double* smoothed_mean,
                       const double* smoothed_cov, int dim, std::span<double> shares) {
  if (shares.size() < 2) return;
  mix(kernels, shares);
  find_message(smoothed_mean, smoothed_cov, dim);
  logs_.clear();
  for (const Kernel& kernel : kernels) logs_.push_back(log_of(kernel));
  const double top = *std::max_element(logs_.begin(), logs_.end());
  double before = 0.0;
  double after = 0.0;
  for (std::size_t i = 0; i < shares.size(); ++i) {
    before += shares[i];
    logs_[i] = shares[i] * std::exp(logs_[i] - top);
    after += logs_[i];
  }
  if (!(after > 0.0 && std::isfinite(after))) return;  // what is not finite cannot choose
  for (std::size_t i = 0; i < shares.size(); ++i) shares[i] = logs_[i] * before / after;
}

}  // namespace steelyard::engine
