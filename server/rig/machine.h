// SPDX-License-Identifier: Apache-2.0
// The machine of a description: states, inputs, how they move and how they are disturbed.
#pragma once

#include <optional>
#include <vector>

#include "engine/model.h"
#include "rig/laws.h"
#include "rig/values.h"

namespace steelyard::rig {

/// Each reads entries of one part of the description; what is wrong goes to the context's problems.
void read_constants(const std::vector<Item>& entries, Context& context);
void read_states(const std::vector<Item>& entries, engine::Model& model, Context& context);
void read_inputs(const std::vector<Item>& entries, engine::Model& model, Context& context);

/// After the states and inputs are known. Returns whether every law of motion is affine.
[[nodiscard]] bool read_motion(const std::vector<Item>& entries, engine::Model& model, Context& context);
void read_unrest(const std::vector<Item>& entries, engine::Model& model, Context& context);

/// `jolts` and `still`: a map that overrides parts of `mode`, or "none".
void read_mode(const Item& item, engine::ModeModel& mode, Context& context);

}  // namespace steelyard::rig
