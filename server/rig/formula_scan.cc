// SPDX-License-Identifier: Apache-2.0
// Our own look at a formula. muParser stops at the first unknown name and cannot say what was meant; and it
// takes assignments and lists of formulas, which are no pure functions of the machine.
#include "rig/formula_scan.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <string>

#include "rig/nearest.h"
#include "rig/number.h"

namespace steelyard::rig {
namespace {

constexpr std::array<std::string_view, 6> kDoubleSigns{"<=", ">=", "!=", "==", "&&", "||"};
constexpr std::string_view kSigns = "+-*/^()<>?:,=";

bool is_space(char c) { return c == ' ' || c == '\t' || c == '\n' || c == '\r'; }

bool is_name_character(char c) {
  return (c >= 'a' && c <= 'z') || (c >= 'A' && c <= 'Z') || (c >= '0' && c <= '9') || c == '_';
}

std::size_t sign_length(std::string_view rest) {
  const std::string_view two = rest.substr(0, 2);
  if (std::find(kDoubleSigns.begin(), kDoubleSigns.end(), two) != kDoubleSigns.end()) return 2;
  return kSigns.find(rest[0]) != std::string_view::npos ? 1 : 0;
}

// The token that the (not empty) rest begins with; its text is empty where there is none.
Token next_token(std::string_view rest) {
  if (const Prefix number = number_prefix(rest); number.length > 0) {
    return {Token::Kind::kNumber, rest.substr(0, number.length), 0};
  }
  std::size_t length = 0;
  while (length < rest.size() && is_name_character(rest[length])) ++length;
  if (length > 0) return {Token::Kind::kName, rest.substr(0, length), 0};
  return {Token::Kind::kSign, rest.substr(0, sign_length(rest)), 0};
}

// One character of UTF-8, whole.
std::string first_character(std::string_view rest) {
  std::size_t length = 1;
  while (length < rest.size() && (static_cast<unsigned char>(rest[length]) & 0xC0U) == 0x80U) ++length;
  return std::string(rest.substr(0, length));
}

bool contains(const std::vector<std::string_view>& names, std::string_view name) {
  return std::find(names.begin(), names.end(), name) != names.end();
}

class Checker {
 public:
  Checker(const std::vector<std::string_view>& variables, const std::vector<std::string_view>& functions,
          std::vector<FormulaError>& errors)
      : variables_(variables), functions_(functions), errors_(errors) {}

  void check(const std::vector<Token>& tokens) {
    for (std::size_t i = 0; i < tokens.size(); ++i) {
      const bool before_bracket = i + 1 < tokens.size() && tokens[i + 1].text == "(";
      const bool after_function = i > 0 && contains(functions_, tokens[i - 1].text);
      if (tokens[i].kind == Token::Kind::kNumber) check_number(tokens[i]);
      if (tokens[i].kind == Token::Kind::kName) check_name(tokens[i], before_bracket);
      if (tokens[i].kind == Token::Kind::kSign) check_sign(tokens[i], after_function);
    }
    for (const Bracket& bracket : brackets_) fail(bracket.position, "this ( is never closed");
    std::stable_sort(errors_.begin(), errors_.end(),
                     [](const FormulaError& a, const FormulaError& b) { return a.position < b.position; });
  }

 private:
  struct Bracket {
    int position;
    bool of_function;
  };

  void fail(int position, std::string message) { errors_.push_back({position, std::move(message)}); }

  void check_number(const Token& token) {
    if (!std::isfinite(number_prefix(token.text).value)) {
      fail(token.position, std::string(token.text) + " is too large a number");
    }
  }

  void check_name(const Token& token, bool before_bracket) {
    const std::string name(token.text);
    if (contains(functions_, token.text)) {
      if (!before_bracket) fail(token.position, name + " is a function; it needs its arguments in ( )");
      return;
    }
    if (!contains(variables_, token.text)) {
      const std::string message = name + " is not a state, input, constant or function";
      fail(token.position, message + did_you_mean(token.text, before_bracket ? functions_ : variables_));
    } else if (before_bracket) {
      fail(token.position, name + " is not a function; a * is missing before the (");
    }
  }

  void check_sign(const Token& token, bool after_function) {
    if (token.text == "=") fail(token.position, "= does not compare; write == to compare");
    if (token.text == "(") brackets_.push_back({token.position, after_function});
    if (token.text == ",") {
      const bool in_function = !brackets_.empty() && brackets_.back().of_function;
      if (!in_function)
        fail(token.position, "a comma separates arguments of a function; decimals take a point");
    }
    if (token.text != ")") return;
    if (brackets_.empty()) {
      fail(token.position, "this ) closes nothing");
    } else {
      brackets_.pop_back();
    }
  }

  const std::vector<std::string_view>& variables_;
  const std::vector<std::string_view>& functions_;
  std::vector<FormulaError>& errors_;
  std::vector<Bracket> brackets_;
};

}  // namespace

std::vector<Token> split_formula(std::string_view text, std::vector<FormulaError>& errors) {
  std::vector<Token> tokens;
  for (std::size_t i = 0; i < text.size();) {
    if (is_space(text[i])) {
      ++i;
      continue;
    }
    Token token = next_token(text.substr(i));
    token.position = static_cast<int>(i) + 1;
    if (token.text.empty()) {
      errors.push_back({token.position, first_character(text.substr(i)) + " has no meaning in a formula"});
      break;
    }
    i += token.text.size();
    tokens.push_back(token);
  }
  return tokens;
}

void check_tokens(const std::vector<Token>& tokens, const std::vector<std::string_view>& variables,
                  const std::vector<std::string_view>& functions, std::vector<FormulaError>& errors) {
  Checker(variables, functions, errors).check(tokens);
}

}  // namespace steelyard::rig
