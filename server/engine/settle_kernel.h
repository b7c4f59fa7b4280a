// SPDX-License-Identifier: Apache-2.0
// One step back in time: what z was at a slice, given what it is at the next. The backward kernel of Rauch,
// Tung & Striebel (1965, AIAA Journal 3:1445) for one pair of hypotheses, over what both carry.
#pragma once

#include <Eigen/Core>
#include <vector>

#include "engine/settle_evidence.h"
#include "engine/settle_slice.h"

namespace steelyard::engine {

/// z(before) = mean + gain · (z(after) − expected) + N(0, left). Columns of `gain` for what only the later
/// hypothesis carries are zero: it is new, hence independent of what was.
struct Kernel {
  const double* mean = nullptr;      ///< rows
  const double* expected = nullptr;  ///< columns
  const double* gain = nullptr;      ///< rows × columns
  const double* left = nullptr;      ///< rows × rows
  const double* held = nullptr;  ///< rows: the column that a row just keeps, as a constant does; −1: none
  Prospect prospect;             ///< of the states
  int rows = 0;
  int columns = 0;

  /// Moments of z(before) for z(after) ~ N(mean, cov); `scratch` has rows × columns numbers.
  void apply(const double* after_mean, const double* after_cov, double* scratch, double* mean_out,
             double* cov_out) const;
  [[nodiscard]] double covariance(const double* scratch, int i, int k) const;
  [[nodiscard]] static std::size_t size(int rows, int columns, int states) {
    return static_cast<std::size_t>(2 * rows + columns + rows * columns + rows * rows) +
           Prospect::size(states);
  }
};

/// Reads the kernel that stands at `at`.
[[nodiscard]] Kernel kernel_at(double* at, int rows, int columns, int states);

class KernelMaker {
 public:
  explicit KernelMaker(const Posterior& posterior);

  /// Appends to `after.kernels` the kernel from hypothesis k of `after` to its ancestor i in `before`.
  void make(const Slice& before, int i, Slice& after, int k);

 private:
  struct Place {
    int before = 0;  ///< indices in z
    int after = 0;
    int channel = -1;  ///< whose own number it is, −1: everyone's
    int part = -1;     ///< of all channels' parts, if it is a level or offset
  };
  void find_carried(const Kept& before, const Kept& after, const Slice& slice);
  void add_changed_walks(const Kept& before, const Kept& after, const Slice& slice);
  void add_fresh_noise(const Slice& before, const Slice& after, int k);
  void fill_transition(const Kept& before, const Slice& slice, const Move& move);
  void predict(const double* mean, const Slice& slice, const Move& move);
  void hold_constants();
  void write(const double* mean, int columns, double* out) const;

  const Model& model_;
  const Layout& layout_;
  const Likelihood& likelihood_;
  int first_colour_;  ///< index in z of the first channel's correlated noise; they end the fixed part
  std::vector<int> colour_of_;  ///< their channels
  std::vector<Place> carried_;
  Eigen::MatrixXd cov_;         ///< of z before
  Eigen::MatrixXd transition_;  ///< of all of z, in the layout before
  Eigen::MatrixXd rows_;        ///< of it, for what is carried
  Eigen::VectorXd expected_;    ///< of what is carried, and the noise that comes to it
  Eigen::MatrixXd noise_;
  Eigen::MatrixXd gain_;
  Eigen::MatrixXd left_;
  Eigen::MatrixXd predicted_;  ///< covariance of what is carried
  std::vector<int> held_;      ///< by row, in `carried_`
};

/// gain · s = cross for a covariance s that may be singular: a coordinate that others determine, or that has
/// no variance, gets no weight. s is used as scratch.
void solve_semidefinite(Eigen::MatrixXd& s, const Eigen::MatrixXd& cross, Eigen::MatrixXd& gain);

}  // namespace steelyard::engine
