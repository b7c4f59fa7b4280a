// SPDX-License-Identifier: Apache-2.0
// Pieces of text that reports for people are made of.
#pragma once

#include <cstddef>
#include <string>
#include <vector>

namespace steelyard::client {

/// With so many significant digits at most.
[[nodiscard]] std::string digits(double value, int significant);
/// For people: six digits say all that a description can mean.
[[nodiscard]] std::string number(double value);
[[nodiscard]] std::string with_unit(double value, const std::string& unit);
/// "a, b, c", or `none`.
[[nodiscard]] std::string joined(const std::vector<std::string>& words, const char* none);
/// "1 state", "2 states"
[[nodiscard]] std::string counted(std::size_t count, const char* what);
/// A duration as it may be written in the rig and, beside it, in hours and days.
[[nodiscard]] std::string long_duration(double seconds);

}  // namespace steelyard::client
