// SPDX-License-Identifier: Apache-2.0
// Exact discretisation of dv = (M v + c) dt + dW over any gap.
#pragma once

#include <Eigen/Core>

#include "engine/model.h"

namespace steelyard::engine {

/// The states and inputs that move together; storage inside the object, so no allocation.
inline constexpr int kMaxCore = kMaxStates + kMaxInputs;
using CoreMatrix = Eigen::Matrix<double, Eigen::Dynamic, Eigen::Dynamic, Eigen::RowMajor, kMaxCore, kMaxCore>;
using CoreVector = Eigen::Matrix<double, Eigen::Dynamic, 1, Eigen::ColMajor, kMaxCore, 1>;

/// A linear system with white noise: rate matrix M (1/s), constant drive c, spectral densities of the noise.
struct LinearSystem {
  CoreMatrix rate;
  CoreVector drive;
  CoreVector density;
};

/// v(t + Δt) = transition · v(t) + shift + N(0, noise).
struct Transition {
  CoreMatrix transition;
  CoreVector shift;
  CoreMatrix noise;
};

/// The integrals of Van Loan (1978, IEEE Trans. Automatic Control 23:395), by their Taylor series over a step
/// with ‖M‖·h ≤ ½ and repeated doubling: nothing overflows over long gaps, where the block matrix exponential
/// with −M in it does. dt_s ≥ 0.
void discretise(const LinearSystem& system, double dt_s, Transition& out);

}  // namespace steelyard::engine
