// SPDX-License-Identifier: Apache-2.0
// Cholesky factor of a covariance that may be singular (an input known exactly has no variance).
#pragma once

#include <cmath>

#include "engine/discretise.h"
#include "engine/hypothesis.h"

namespace steelyard::engine {

/// Lower L with L Lᵀ = a; columns without variance come out as zero.
inline void cholesky(const CoreMatrix& a, CoreMatrix& l) {
  const auto n = a.rows();
  l.setZero(n, n);
  for (Eigen::Index k = 0; k < n; ++k) {
    double pivot = a(k, k);
    for (Eigen::Index j = 0; j < k; ++j) pivot -= l(k, j) * l(k, j);
    if (!(pivot > 1e-14 * a(k, k))) continue;  // also for NaN and for no variance at all
    l(k, k) = std::sqrt(pivot);
    for (Eigen::Index i = k + 1; i < n; ++i) {
      double sum = a(i, k);
      for (Eigen::Index j = 0; j < k; ++j) sum -= l(i, j) * l(k, j);
      l(i, k) = sum / l(k, k);
    }
  }
}

/// x ← x · L⁻¹ for a row vector, taking 0 where L has no pivot.
template <typename Row>
void divide_by_lower(Row&& x, const CoreMatrix& l) {
  for (Eigen::Index k = l.rows() - 1; k >= 0; --k) {
    double sum = x(k);
    for (Eigen::Index i = k + 1; i < l.rows(); ++i) sum -= x(i) * l(i, k);
    x(k) = l(k, k) > 0.0 ? sum / l(k, k) : 0.0;
  }
}

/// What sigma points are laid by: the mean of a hypothesis's core and the root of its covariance.
struct CoreGaussian {
  CoreGaussian(const Hypothesis& h, int core) : mean(core) {
    CoreMatrix cov(core, core);
    for (int i = 0; i < core; ++i) {
      mean(i) = h.mean[i];
      for (int k = 0; k < core; ++k) cov(i, k) = h.p(i, k);
    }
    cholesky(cov, root);
  }
  CoreVector mean;
  CoreMatrix root;
};

}  // namespace steelyard::engine
