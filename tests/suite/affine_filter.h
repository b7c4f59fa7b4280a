// SPDX-License-Identifier: Apache-2.0
// A reference filter's model of an affine machine, discretised exactly by Van Loan's (1978) block
// exponential, with Eigen's matrix exponential: none of the engine's code.
#pragma once

#include "suite/machine.h"

namespace steelyard::suite {

/// dx/dt = A x + B u + c
struct AffineLaw {
  Eigen::MatrixXd A;
  Eigen::MatrixXd B;  ///< with no columns where there are no inputs
  Eigen::VectorXd c;
};

/// Fills `move` and `noise` for steps of this length.
void discretise(const AffineLaw& law, double step_s, FilterModel& model);

/// The covariance that white noise of unit density on the derivative of state i adds in one step.
[[nodiscard]] Eigen::MatrixXd step_noise(const Eigen::MatrixXd& A, int i, double step_s);

}  // namespace steelyard::suite
