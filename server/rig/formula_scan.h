// SPDX-License-Identifier: Apache-2.0
// A formula as a row of tokens, and what can be said about it without knowing its grammar.
#pragma once

#include <cstddef>
#include <string_view>
#include <vector>

#include "rig/formula.h"

namespace steelyard::rig {

struct Token {
  enum class Kind { kNumber, kName, kSign };
  Kind kind = Kind::kSign;
  std::string_view text;  ///< within the formula
  int position = 0;       ///< from 1
};

/// Splits a formula; stops at the first character that no formula has, and adds an error.
[[nodiscard]] std::vector<Token> split_formula(std::string_view text, std::vector<FormulaError>& errors);

/// Every name that nobody knows, functions without brackets and the other way round, assignments, brackets
/// that do not match, commas outside functions. `variables` and `functions` are the known names.
void check_tokens(const std::vector<Token>& tokens, const std::vector<std::string_view>& variables,
                  const std::vector<std::string_view>& functions, std::vector<FormulaError>& errors);

}  // namespace steelyard::rig
