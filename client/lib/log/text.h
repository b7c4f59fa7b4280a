// SPDX-License-Identifier: Apache-2.0
// Numbers and times as they stand in logs and outputs: independent of the locale, and exact (a time never
// passes through a floating-point number; a written number reads back as the same bits).
#pragma once

#include <optional>
#include <string>
#include <string_view>

#include "engine/model.h"

namespace steelyard::client {

/// How times are written: decimal seconds since 1970-01-01T00:00:00Z, or RFC 3339 in UTC.
enum class TimeStyle { kSeconds, kRfc3339 };

/// RFC 3339 with an offset or Z, or decimal seconds since 1970-01-01T00:00:00Z. Digits beyond the nanosecond
/// are rounded to the nearest. nullopt: neither form, no such date, or outside 1677-09-21 … 2262-04-11.
[[nodiscard]] std::optional<engine::TimeNs> parse_time(std::string_view text);

/// Exact to the nanosecond, trailing zeros cut: "1700000000.25", "2023-11-14T22:13:20.25Z".
[[nodiscard]] std::string time_text(engine::TimeNs time_ns, TimeStyle style);

/// A decimal number, "nan" or "inf" (the caller judges whether it must be finite). A number too large for a
/// double comes back as infinity, one too small as 0. nullopt: not a number.
[[nodiscard]] std::optional<double> parse_number(std::string_view text);

/// The shortest decimal text that reads back as the same number.
void append_number(std::string& out, double value);

/// `text` in quotes, cut to 40 characters and with control characters shown as '?', for messages.
[[nodiscard]] std::string shown(std::string_view text);

}  // namespace steelyard::client
