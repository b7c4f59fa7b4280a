// SPDX-License-Identifier: Apache-2.0
// Groups of channels whose faults may have one cause.
#pragma once

#include "engine/model.h"
#include "rig/laws.h"
#include "rig/values.h"

namespace steelyard::rig {

/// Reads `common` into the model, whose channels are known; what is wrong goes to the context's problems.
void read_common(const Item& item, engine::Model& model, Context& context);

}  // namespace steelyard::rig
