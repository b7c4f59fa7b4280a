// SPDX-License-Identifier: Apache-2.0
// Which states the readings of some channels determine (observability, Kalman 1960): those in the space
// spanned by the rows h, hF, hF², … of the machine linearised at a point. Nonlinear machines may show more
// away from the point than at it. Standing biases and offsets are left out: this tells what a sound channel
// shows.
#pragma once

#include <Eigen/Core>
#include <vector>

#include "engine/model.h"

namespace steelyard::client {

/// States and inputs, in the model's order and units.
struct Point {
  std::vector<double> states;
  std::vector<double> inputs;
};

/// Slopes of a law with respect to the states, at the point; 0 where there is no finite slope. Not for
/// concurrent use with other users of the model's formulas.
[[nodiscard]] Eigen::RowVectorXd slopes_of(const engine::Model& model, const engine::Law& law,
                                           const Point& point);

/// The machine linearised at a point, in units of each state's start_sd and of the response time.
class Linearised {
 public:
  /// Not for concurrent use with other users of the model's formulas.
  Linearised(const engine::Model& model, const Point& point);

  /// Orthonormal rows that span what the channels show.
  [[nodiscard]] Eigen::MatrixXd shown_space(const std::vector<int>& channels) const;
  /// By state: is it determined by these channels?
  [[nodiscard]] std::vector<bool> shown_states(const std::vector<int>& channels) const;
  /// Do these channels tell what `channel` ought to read, in all its parts?
  [[nodiscard]] bool foretold(int channel, const std::vector<int>& by) const;

 private:
  Eigen::MatrixXd motion_;            // states × states
  Eigen::MatrixXd reads_;             // parts × states, rows of length 1 (or 0: reads no state here)
  std::vector<Eigen::Index> row_of_;  // by channel, its first part's; one more for the end
};

/// The start, and a point near it that has no symmetry by chance and all inputs at work.
[[nodiscard]] Point start_of(const engine::Model& model);
[[nodiscard]] Point near_start_of(const engine::Model& model);

}  // namespace steelyard::client
