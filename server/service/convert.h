// SPDX-License-Identifier: Apache-2.0
// A picture of a machine as a message.
#pragma once

#include "service/machine.h"
#include "steelyard/v1/estimates.pb.h"

namespace steelyard::service {

/// `message` must be empty.
void fill_moment(const Picture& picture, v1::Moment& message);

/// See EstimateQuality in estimates.proto for the rules.
[[nodiscard]] v1::EstimateQuality quality_of(const Picture& picture);

}  // namespace steelyard::service
