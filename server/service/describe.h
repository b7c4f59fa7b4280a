// SPDX-License-Identifier: Apache-2.0
// Descriptions of rigs: between the message and the text, and what differs between two of them.
#pragma once

#include <optional>
#include <string>

#include "steelyard/v1/rig.pb.h"

namespace steelyard::service {

/// The JSON text of a rig message, which is a rig file; maps in bytewise order of their keys. Empty if the
/// message cannot be printed (a Value that holds nothing).
[[nodiscard]] std::optional<std::string> to_text(const v1::Rig& rig);

/// The message of a rig file that has no problems.
[[nodiscard]] std::optional<v1::Rig> to_message(const std::string& text);

/// What changes between two descriptions whose texts differ. What is for people alone (tag, where, serial,
/// note) is no difference of meaning.
[[nodiscard]] v1::RigChange compare(const v1::Rig& before, const v1::Rig& after);

/// All of it is new.
[[nodiscard]] v1::RigChange all_new(const v1::Rig& rig);

}  // namespace steelyard::service
