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

using RowMap = Eigen::Map<CoreMatrix>;

// x ← L⁻¹ x by columns; what has no variance stays out.
template <typename Lower, typename Columns>
void solve_lower(const Lower& l, Columns&& x) {
  for (Eigen::Index i = 0; i < l.rows(); ++i) {
    for (Eigen::Index k = 0; k < i; ++k) x.row(i) -= l(i, k) * x.row(k);
    x.row(i) *= l(i, i) > 0.0 ? 1.0 / l(i, i) : 0.0;
  }
}

template <typename Lower, typename Cov>
void whiten(const Lower& root, Cov&& cov) {
  solve_lower(root, cov);
  cov.transposeInPlace();
  solve_lower(root, cov);
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
  constexpr int kSweeps = 30;     // four or five are enough
  constexpr double kOff = 1e-10;  // convergence is quadratic: the last sweep leaves far less
  const auto n = symmetric.rows();
  vectors.setIdentity(n, n);
  for (int sweep = 0; sweep < kSweeps; ++sweep) {
    bool done = true;
    for (Eigen::Index p = 0; p < n; ++p) {
      for (Eigen::Index q = p + 1; q < n; ++q) {
        if (!(std::fabs(symmetric(p, q)) > kOff * (std::fabs(symmetric(p, p)) + std::fabs(symmetric(q, q)))))
          continue;
        rotate(symmetric, vectors, p, q);
        done = false;
      }
    }
    if (done) return;
  }
}

Prospect Prospect::at(double* numbers, int states) {
  double* cov = numbers + states;
  double* group = cov + states * states;
  return {numbers, cov, group, group + states};
}

void Evidence::prepare(std::span<const Prospect> group, std::span<const double> shares) {
  double total = 0.0;
  for (const double s : shares) total += s;
  CoreVector mean = CoreVector::Zero(states_);
  for (std::size_t i = 0; i < shares.size(); ++i)
    mean += shares[i] / total * Eigen::Map<const Eigen::VectorXd>(group[i].mean, states_);
  cov_.setZero(states_, states_);
  for (std::size_t i = 0; i < shares.size(); ++i) {
    Eigen::Map<Eigen::VectorXd> step(group[i].mean, states_);
    step -= mean;
    cov_ += shares[i] / total * (RowMap(group[i].cov, states_, states_) + step * step.transpose());
  }
  cholesky(cov_, root_);
  for (const Prospect& p : group) {
    solve_lower(root_, Eigen::Map<Eigen::VectorXd>(p.mean, states_));
    whiten(root_, RowMap(p.cov, states_, states_));
    Eigen::Map<Eigen::VectorXd>(p.group_mean, states_) = mean;
    RowMap(p.group_root, states_, states_) = root_;
  }
}

void Evidence::find_message(const Prospect& group, const double* smoothed_mean, const double* smoothed_cov,
                            int dim) {
  const RowMap root(group.group_root, states_, states_);
  cov_.resize(states_, states_);
  slope_.resize(states_);
  for (int i = 0; i < states_; ++i) {
    slope_(i) = smoothed_mean[i] - group.group_mean[i];
    for (int k = 0; k < states_; ++k) cov_(i, k) = smoothed_cov[i * dim + k];
  }
  solve_lower(root, slope_);
  whiten(root, cov_);
  for (int i = 0; i < states_; ++i)
    for (int k = 0; k < i; ++k) cov_(i, k) = cov_(k, i) = 0.5 * (cov_(i, k) + cov_(k, i));
  diagonalise(cov_, turn_);
  const CoreVector a = turn_.transpose().lazyProduct(slope_);
  slope_.setZero();
  precision_.resize(states_, states_);
  for (int i = 0; i < states_; ++i) {
    const double variance = std::clamp(cov_(i, i), 1e-12, 1.0);
    slope_ += a(i) / variance * turn_.col(i);
    precision_.col(i) = std::sqrt(1.0 / variance - 1.0) * turn_.col(i);
  }
}

// Loops rather than matrix products: this runs for each pair of each step, and there are few states.
double Evidence::log_of(const Prospect& p) {
  const int n = states_;
  seen_.setZero(n, n);  // S J^½
  pulled_.resize(n);    // m + S h
  double log = 0.0;
  for (int i = 0; i < n; ++i) {
    double pull = 0.0;
    for (int l = 0; l < n; ++l) {
      const double s = p.cov[i * n + l];
      pull += s * slope_(l);
      for (int k = 0; k < n; ++k) seen_(i, k) += s * precision_(l, k);
    }
    log += slope_(i) * (p.mean[i] + 0.5 * pull);
    pulled_(i) = p.mean[i] + pull;
  }
  // The factor of M, row by row, and with it M^(−½) J^½ (m + Sh).
  double determinant = 1.0;
  for (int i = 0; i < n; ++i) {
    double rest = 0.0;
    for (int l = 0; l < n; ++l) rest += precision_(l, i) * pulled_(l);
    for (int k = 0; k <= i; ++k) {
      double sum = i == k ? 1.0 : 0.0;
      for (int l = 0; l < n; ++l) sum += precision_(l, i) * seen_(l, k);
      for (int l = 0; l < k; ++l) sum -= root_(i, l) * root_(k, l);
      root_(i, k) = i == k ? std::sqrt(sum) : sum / root_(k, k);
      if (k < i) rest -= root_(i, k) * cov_(k, 0);
    }
    determinant *= root_(i, i);
    cov_(i, 0) = rest / root_(i, i);
    log -= 0.5 * cov_(i, 0) * cov_(i, 0);
  }
  return log - std::log(determinant);
}

void Evidence::reweigh(std::span<const Prospect> group, const double* smoothed_mean,
                       const double* smoothed_cov, int dim, std::span<double> shares) {
  if (shares.size() < 2) return;
  find_message(group[0], smoothed_mean, smoothed_cov, dim);
  root_.resize(states_, states_);
  logs_.clear();
  for (const Prospect& p : group) logs_.push_back(log_of(p));
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
