// SPDX-License-Identifier: Apache-2.0
// Whether bytes are text.
#pragma once

#include <cstddef>
#include <optional>
#include <string_view>

namespace steelyard::rig {

/// Index of the first byte that cannot stand in a text file: not valid UTF-8 (RFC 3629), or a control
/// character other than tab, line feed and carriage return.
[[nodiscard]] std::optional<std::size_t> first_bad_byte(std::string_view text);

}  // namespace steelyard::rig
