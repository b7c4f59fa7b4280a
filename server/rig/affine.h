// SPDX-License-Identifier: Apache-2.0
// Whether a formula is exactly affine in states and inputs, found by evaluating it.
#pragma once

#include <optional>
#include <span>

#include "engine/model.h"

namespace steelyard::rig {

/// Where the machine usually is: a nonlinearity near there must not be missed.
struct Region {
  double centre = 0.0;
  double spread = 1.0;
};

/// The affine form of `formula`, or nullopt where it differs by more than rounding at any of 64 random points
/// (fixed seed): half of them within `states` and `inputs`, half at sizes from 1e-3 to 1e6. The formula must
/// not depend on time.
[[nodiscard]] std::optional<engine::AffineForm> find_affine(engine::Formula& formula,
                                                            std::span<const Region> states,
                                                            std::span<const Region> inputs);

}  // namespace steelyard::rig
