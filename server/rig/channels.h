// SPDX-License-Identifier: Apache-2.0
// The channels of a description.
#pragma once

#include <span>

#include "engine/model.h"
#include "rig/laws.h"
#include "rig/rig.h"
#include "rig/values.h"

namespace steelyard::rig {

struct ReadChannel {
  engine::ChannelModel model;
  ChannelLabels labels;
  bool is_affine = false;
};

/// Reads one entry of `channels`; what is wrong goes to the context's problems, and the default stands for
/// it.
[[nodiscard]] ReadChannel read_channel(const Item& item, std::span<const engine::StateModel> states,
                                       Context& context);

}  // namespace steelyard::rig
