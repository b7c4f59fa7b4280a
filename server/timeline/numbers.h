// SPDX-License-Identifier: Apache-2.0
// Numbers as people read them. Independent of the locale.
#pragma once

#include <string>

#include "engine/estimate.h"

namespace steelyard::timeline {

/// Half the width of a normal distribution's 90 % interval, in standard deviations.
inline constexpr double kHalf90 = 1.6448536269514722;

/// A number with as many digits as its uncertainty deserves: (0.18234, 0.006) → "0.182".
[[nodiscard]] std::string rounded(double value, double sd);

/// The same with its sign, plus included.
[[nodiscard]] std::string with_sign(double value, double sd);

/// " (90 %: +0.172 to +0.192)", or empty where the sd says nothing.
[[nodiscard]] std::string interval_words(double mean, double sd, bool sign);

/// Two significant digits, for a standard deviation that stands alone.
[[nodiscard]] std::string two_digits(double value);

/// "1" is the unit of what has none.
[[nodiscard]] std::string with_unit(const std::string& number, const std::string& unit);

/// "93 %"
[[nodiscard]] std::string percent(double probability);

/// "0.4 s", "42 s", "5 min", "3 h", "4 d"
[[nodiscard]] std::string age_words(double seconds);

}  // namespace steelyard::timeline
