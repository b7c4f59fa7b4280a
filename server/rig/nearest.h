// SPDX-License-Identifier: Apache-2.0
// Which known name was probably meant by an unknown one.
#pragma once

#include <span>
#include <string>
#include <string_view>

namespace steelyard::rig {

/// Edits between two names: insertions, deletions, replacements and swaps of neighbours (Damerau 1964;
/// Levenshtein 1966; the restricted form, in which no part is edited twice).
[[nodiscard]] int edit_distance(std::string_view a, std::string_view b);

/// The known name with the fewest edits to `name` (the first of equals), or empty where none is near:
/// much more than one edit in three characters would be a guess.
[[nodiscard]] std::string_view nearest(std::string_view name, std::span<const std::string_view> known);

/// "; did you mean X?", or where none is near "; known are X, Y, Z", as far as that helps.
[[nodiscard]] std::string did_you_mean(std::string_view name, std::span<const std::string_view> known);

}  // namespace steelyard::rig
