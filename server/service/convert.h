// SPDX-License-Identifier: Apache-2.0
// A picture of a machine as a message.
#pragma once

#include <string>

#include "service/machine.h"
#include "steelyard/v1/estimates.pb.h"

namespace steelyard::service {

/// `message` must be empty.
void fill_moment(const Picture& picture, v1::Moment& message);

/// See EstimateQuality in estimates.proto for the rules.
[[nodiscard]] v1::EstimateQuality quality_of(const Picture& picture);

/// One explanation for people: "all channels are sound", "sonic offset by +0.182 ± 0.006 m; radar frozen
/// at 2.03 m".
[[nodiscard]] std::string explanation_words(const rig::Rig& rig, const engine::Explanation& explanation);

}  // namespace steelyard::service
