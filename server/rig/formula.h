// SPDX-License-Identifier: Apache-2.0
// Formulas of a description: checked first by our own scan, which knows positions and near names, then
// compiled by muParser. Nothing here depends on the locale or on anything shared between threads.
#pragma once

#include <cstddef>
#include <memory>
#include <string>
#include <string_view>
#include <utility>
#include <vector>

#include "engine/model.h"

namespace steelyard::rig {

inline constexpr std::size_t kMaxFormulaBytes = 1000;
inline constexpr std::string_view kTimeName = "t";  ///< seconds since 1970-01-01T00:00:00Z

/// The names that a formula may use, beside functions and t. An empty name keeps the place of a state or
/// input that no formula can name.
struct Scope {
  std::vector<std::string> states;
  std::vector<std::string> inputs;
  std::vector<std::pair<std::string, double>> constants;
};

struct FormulaError {
  int position = 0;  ///< from 1, in characters; 0: the formula as a whole
  std::string message;
};

/// A formula that has been checked.
struct CheckedFormula {
  std::shared_ptr<engine::Formula> formula;  ///< null if there are errors
  std::vector<FormulaError> errors;
  bool uses_time = false;
  bool may_branch = false;  ///< has a comparison or a choice: a few points cannot show it to be affine
};

/// Never throws for anything in `text`.
[[nodiscard]] CheckedFormula compile_formula(std::string_view text, const Scope& scope);

/// Functions and constants that formulas have anyhow, and t: no state or channel may have such a name.
[[nodiscard]] bool is_formula_word(std::string_view name);

}  // namespace steelyard::rig
