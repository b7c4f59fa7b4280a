// SPDX-License-Identifier: Apache-2.0
// The table in a terminal, and the same as a page.
#pragma once

#include <string>
#include <vector>

#include "suite/bounds.h"

namespace steelyard::suite {

/// Prints rows and summaries to stdout; returns how many bounds are broken.
int print_table(const std::vector<Result>& results);

/// Prints both runs' errors; returns how many rows differ by more than 3 % and means by more than 0.5 %.
int print_comparison(const std::vector<Result>& once, const std::vector<Result>& twice);

/// A whole HTML page that needs nothing else. Throws std::runtime_error that names the file if it cannot be
/// written.
void write_page(const std::string& path, const std::vector<Result>& results, const Settings& settings);

/// The machines that occur, in their order.
[[nodiscard]] std::vector<const Machine*> machines_of(const std::vector<Result>& results);
[[nodiscard]] std::string joined(const std::vector<std::string>& parts);

}  // namespace steelyard::suite
