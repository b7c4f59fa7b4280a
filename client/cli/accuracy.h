// SPDX-License-Identifier: Apache-2.0
// How well the channels of a rig know its states, and what is lost without each of them and each pair.
#pragma once

#include <string>

#include "rig/rig.h"

namespace steelyard::client {

/// A table for people: a row for all channels, for each one left out, and for each pair.
[[nodiscard]] std::string accuracy_text(const rig::Rig& rig);

}  // namespace steelyard::client
