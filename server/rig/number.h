// SPDX-License-Identifier: Apache-2.0
// Numbers as text, the same under every locale.
#pragma once

#include <cstddef>
#include <optional>
#include <string>
#include <string_view>

namespace steelyard::rig {

/// A decimal number, the whole of `text`: "-0.5", "+2", "1e-3", ".5". Nothing else: no hex, no inf, no nan;
/// nullopt too where it is too large for a double.
[[nodiscard]] std::optional<double> parse_number(std::string_view text);

/// Length of the unsigned decimal number that `text` begins with, and its value; 0 if there is none.
struct Prefix {
  std::size_t length = 0;
  double value = 0.0;
};
[[nodiscard]] Prefix number_prefix(std::string_view text);

/// Shortest text that reads back as the same double.
[[nodiscard]] std::string number_text(double value);

}  // namespace steelyard::rig
