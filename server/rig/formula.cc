// SPDX-License-Identifier: Apache-2.0
// muParser behind engine::Formula.
#include "rig/formula.h"

#include <muParser.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <span>

#include "rig/formula_scan.h"
#include "rig/number.h"

namespace steelyard::rig {
namespace {

// Takes precedence over muParser's own reader of numbers, which goes through a locale that all parsers of the
// process share. (SetDecSep would do, but it writes to that shared locale: a race between threads.)
int read_number_literal(const mu::char_type* rest, int* position, mu::value_type* value) {
  const Prefix number = number_prefix(rest);
  if (number.length == 0) return 0;
  *position += static_cast<int>(number.length);
  *value = number.value;
  return 1;
}

class Compiled final : public engine::Formula {
 public:
  Compiled(const std::string& text, const Scope& scope)
      : states_(scope.states.size()), inputs_(scope.inputs.size()) {
    parser_.AddValIdent(read_number_literal);
    define(scope.states, states_);
    define(scope.inputs, inputs_);
    for (const auto& [name, value] : scope.constants) parser_.DefineConst(name, value);
    parser_.DefineVar(std::string(kTimeName), &time_s_);
    parser_.SetExpr(text);
  }
  // The parser holds addresses of the members.
  Compiled(const Compiled&) = delete;
  Compiled& operator=(const Compiled&) = delete;

  /// Compiles; throws mu::ParserError where the text is no formula.
  void warm_up() { (void)parser_.Eval(); }

  double evaluate(std::span<const double> states, std::span<const double> inputs, double time_s) override {
    if (states.size() != states_.size() || inputs.size() != inputs_.size()) return kNoValue;
    std::copy(states.begin(), states.end(), states_.begin());
    std::copy(inputs.begin(), inputs.end(), inputs_.begin());
    time_s_ = time_s;
    try {
      return parser_.Eval();
    } catch (const mu::ParserError&) {
      return kNoValue;
    }
  }

 private:
  void define(const std::vector<std::string>& names, std::vector<double>& values) {
    for (std::size_t i = 0; i < names.size(); ++i) {
      if (!names[i].empty()) parser_.DefineVar(names[i], &values[i]);
    }
  }

  static constexpr double kNoValue = std::numeric_limits<double>::quiet_NaN();
  std::vector<double> states_;
  std::vector<double> inputs_;
  double time_s_ = 0.0;
  mu::Parser parser_;
};

/// What every muParser knows by itself.
struct Builtin {
  std::vector<std::string> functions;
  std::vector<std::string> constants;
};

const Builtin& builtin() {
  static const Builtin names = [] {
    Builtin out;
    const mu::Parser parser;
    for (const auto& [name, callback] : parser.GetFunDef()) out.functions.push_back(name);
    for (const auto& [name, value] : parser.GetConst()) out.constants.push_back(name);
    return out;
  }();
  return names;
}

std::vector<std::string_view> variable_names(const Scope& scope) {
  std::vector<std::string_view> out(scope.states.begin(), scope.states.end());
  out.insert(out.end(), scope.inputs.begin(), scope.inputs.end());
  std::erase(out, std::string_view());
  for (const auto& [name, value] : scope.constants) out.push_back(name);
  out.push_back(kTimeName);
  out.insert(out.end(), builtin().constants.begin(), builtin().constants.end());
  return out;
}

// muParser's numbers of errors in our words; what the scan has found before needs none.
std::string syntax_message(mu::EErrorCodes code, const std::string& token) {
  switch (code) {
    case mu::ecUNEXPECTED_EOF:
      return "ends too early";
    case mu::ecUNEXPECTED_OPERATOR:
      return "an operator (" + token + ") has nothing to work on";
    case mu::ecUNEXPECTED_VAL:
    case mu::ecUNEXPECTED_VAR:
    case mu::ecUNEXPECTED_FUN:
      return "an operator is missing before " + token;
    case mu::ecUNEXPECTED_PARENS:
      return "a bracket cannot stand here";
    case mu::ecUNEXPECTED_ARG_SEP:
      return "an argument is missing before the comma";
    case mu::ecTOO_MANY_PARAMS:
      return token + " has too many arguments";
    case mu::ecTOO_FEW_PARAMS:
      return token + " has too few arguments";
    case mu::ecUNEXPECTED_CONDITIONAL:
    case mu::ecMISPLACED_COLON:
    case mu::ecMISSING_ELSE_CLAUSE:
      return "a choice is written condition ? value : value";
    default:
      return token.empty() ? "cannot be understood" : token + " cannot be understood here";
  }
}

FormulaError error_of(const mu::ParserError& error, std::string_view text) {
  const int last = static_cast<int>(text.size()) + 1;  // "ends too early" points behind the end
  const int position = error.GetPos() < 0 ? 0 : std::min(error.GetPos() + 1, last);
  std::string token = error.GetToken();
  while (!token.empty() && token.back() == ' ') token.pop_back();
  return {position, syntax_message(error.GetCode(), token)};
}

bool is_branch(const Token& token) {
  constexpr std::string_view kBranching[] = {"<", ">", "<=", ">=", "==", "!=", "?", "&&", "||"};
  return std::find(std::begin(kBranching), std::end(kBranching), token.text) != std::end(kBranching);
}

void scan(std::string_view text, const Scope& scope, CheckedFormula& out) {
  const std::vector<Token> tokens = split_formula(text, out.errors);
  if (!out.errors.empty()) return;
  const std::vector<std::string_view> functions(builtin().functions.begin(), builtin().functions.end());
  check_tokens(tokens, variable_names(scope), functions, out.errors);
  out.may_branch = std::any_of(tokens.begin(), tokens.end(), is_branch);
  out.uses_time =
      std::any_of(tokens.begin(), tokens.end(), [](const Token& token) { return token.text == kTimeName; });
  if (tokens.empty()) out.errors.push_back({0, "is empty; must be a formula"});
}

}  // namespace

CheckedFormula compile_formula(std::string_view text, const Scope& scope) {
  CheckedFormula out;
  if (text.size() > kMaxFormulaBytes) {
    out.errors.push_back({0, "has " + std::to_string(text.size()) + " characters; at most " +
                                 std::to_string(kMaxFormulaBytes) + " are allowed"});
    return out;
  }
  scan(text, scope, out);
  if (!out.errors.empty()) return out;
  try {
    auto compiled = std::make_shared<Compiled>(std::string(text), scope);
    compiled->warm_up();
    out.formula = std::move(compiled);
  } catch (const mu::ParserError& error) {
    out.errors.push_back(error_of(error, text));
  }
  return out;
}

bool is_formula_word(std::string_view name) {
  const auto has = [&](const std::vector<std::string>& names) {
    return std::find(names.begin(), names.end(), name) != names.end();
  };
  return name == kTimeName || has(builtin().functions) || has(builtin().constants);
}

}  // namespace steelyard::rig
