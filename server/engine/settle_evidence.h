// SPDX-License-Identifier: Apache-2.0
// What the future says of the ancestors of one hypothesis. Their shares of its weight are those that were
// filtered; where they had moved to differs, and what the machine is now known to have done may suit one of
// them only (the correction that Barber 2006, Journal of Machine Learning Research 7:2515, adds to Kim's
// smoother).
#pragma once

#include <span>
#include <vector>

#include "engine/discretise.h"
#include "engine/hypothesis.h"

namespace steelyard::engine {

/// Where one ancestor's states were predicted to be, as seen from where they were predicted to be by all of a
/// group together: in coordinates in which that is N(0, 1). Stands at the end of each kernel.
struct Prospect {
  double* mean = nullptr;        ///< n = number of states
  double* cov = nullptr;         ///< n × n
  double* group_mean = nullptr;  ///< n: of the whole group, as it is
  double* group_root = nullptr;  ///< n × n, lower: its covariance is root · rootᵀ
  [[nodiscard]] static std::size_t size(int states) {
    return static_cast<std::size_t>(2 * states * (1 + states));
  }
  [[nodiscard]] static Prospect at(double* numbers, int states);
};

class Evidence {
 public:
  explicit Evidence(const Layout& layout) : states_(layout.states) {}

  /// A group: shares of ancestors that have equal conditions, so that what was predicted for them differs by
  /// their machine modes alone. On entry `mean` and `cov` are as they are; all else is filled.
  void prepare(std::span<const Prospect> group, std::span<const double> shares);

  /// Rescales `shares` (their sum stays) by the probability that each predicted what the states have turned
  /// out to be, whose smoothed moments are given (of all of z, `dim` numbers).
  void reweigh(std::span<const Prospect> group, const double* smoothed_mean, const double* smoothed_cov,
               int dim, std::span<double> shares);

 private:
  void find_message(const Prospect& group, const double* smoothed_mean, const double* smoothed_cov, int dim);
  [[nodiscard]] double log_of(const Prospect& prospect);

  int states_;
  CoreMatrix cov_;  ///< scratch
  CoreMatrix root_;
  CoreMatrix turn_;
  CoreVector slope_;      ///< h
  CoreMatrix precision_;  ///< J^½: J = precision · precisionᵀ
  CoreMatrix seen_;       ///< scratch of log_of()
  CoreVector pulled_;
  std::vector<double> logs_;
};

/// Eigenvalues of a symmetric matrix are left on its diagonal; `vectors` has the eigenvectors as columns. By
/// Jacobi's rotations (1846).
void diagonalise(CoreMatrix& symmetric, CoreMatrix& vectors);

}  // namespace steelyard::engine
