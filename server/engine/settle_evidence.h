// SPDX-License-Identifier: Apache-2.0
// What the future says of the ancestors of one hypothesis. Their shares of its weight are those that were
// filtered; where they had moved to differs, and what the machine is now known to have done may suit one of
// them only (the correction that Barber 2006, Journal of Machine Learning Research 7:2515, adds to Kim's
// smoother).
#pragma once

#include <span>
#include <vector>

#include "engine/settle_kernel.h"

namespace steelyard::engine {

class Evidence {
 public:
  explicit Evidence(const Layout& layout) : states_(layout.states) {}

  /// Shares of ancestors that have equal conditions, so that what was predicted for them differs by their
  /// machine modes alone. Rescales `shares` (their sum stays) by the probability that each predicted what the
  /// states have turned out to be, whose smoothed moments are given (of all of z, `dim` numbers); kernels[i]
  /// belongs to shares[i].
  void reweigh(std::span<const Kernel> kernels, const double* smoothed_mean, const double* smoothed_cov,
               int dim, std::span<double> shares);

 private:
  void mix(std::span<const Kernel> kernels, std::span<const double> shares);
  void find_message(const double* smoothed_mean, const double* smoothed_cov, int dim);
  [[nodiscard]] double log_of(const Kernel& kernel);
  void whiten(CoreMatrix& cov) const;

  int states_;
  CoreVector mean_;       ///< b: predicted for all of them together
  CoreMatrix cov_;        ///< B
  CoreMatrix root_;       ///< B = root · rootᵀ
  CoreMatrix turn_;       ///< the smoothed covariance is diagonal in its columns, in whitened coordinates
  CoreVector slope_;      ///< h
  CoreVector precision_;  ///< √J
  CoreMatrix scratch_;
  std::vector<double> logs_;
};

/// Eigenvalues of a symmetric matrix are left on its diagonal; `vectors` has the eigenvectors as columns. By
/// Jacobi's rotations (1846).
void diagonalise(CoreMatrix& symmetric, CoreMatrix& vectors);

}  // namespace steelyard::engine
