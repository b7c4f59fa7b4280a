// SPDX-License-Identifier: Apache-2.0
// Laws: text → checked formula → affine form where it is one.
#include "rig/laws.h"

#include <algorithm>
#include <cmath>
#include <utility>

#include "rig/number.h"

namespace steelyard::rig {
namespace {

constexpr double kSomeTime_s = 1.7e9;  // a moment of 2023: formulas of t meet such numbers, not 0

void report_formula(const Item& item, const FormulaError& error, Problems& problems) {
  const std::string where = error.position > 0 ? "position " + std::to_string(error.position) + ": " : "";
  problems.add(item.place(), item.path, where + error.message);
}

// The formula of a scalar, or nullopt with every error reported.
std::optional<CheckedFormula> checked(const Item& item, Context& context) {
  if (!item.node->is_scalar()) {
    report_rule(item, "a formula or a number", context.problems);
    return std::nullopt;
  }
  if (!context.names_known || context.problems.full()) return std::nullopt;
  CheckedFormula out = compile_formula(item.node->text, context.scope);
  for (const FormulaError& error : out.errors) report_formula(item, error, context.problems);
  return out.formula ? std::optional(std::move(out)) : std::nullopt;
}

bool is_constant(const engine::AffineForm& form) {
  const auto is_zero = [](double v) { return v == 0.0; };
  return std::all_of(form.on_states.begin(), form.on_states.end(), is_zero) &&
         std::all_of(form.on_inputs.begin(), form.on_inputs.end(), is_zero);
}

ReadLaw law_of(const CheckedFormula& checked_formula, const Context& context) {
  ReadLaw out{checked_formula.formula, false, std::nullopt};
  if (context.starts_right) {
    out.at_start = checked_formula.formula->evaluate(context.states, context.inputs, kSomeTime_s);
  }
  if (checked_formula.uses_time || checked_formula.may_branch) return out;
  if (auto form = find_affine(*checked_formula.formula, context.state_regions, context.input_regions)) {
    out.law = *std::move(form);
    out.is_affine = true;
  }
  return out;
}

void report_start(const Item& item, double value, std::string_view rule, Problems& problems) {
  problems.add(item.place(), item.path,
               "gives " + (std::isnan(value) ? "nan" : number_text(value)) + " at the start; must be " +
                   std::string(rule) + " there");
}

}  // namespace

engine::AffineForm constant_law(const Context& context, double value) {
  return {std::vector<double>(context.states.size(), 0.0), std::vector<double>(context.inputs.size(), 0.0),
          value};
}

std::optional<ReadLaw> read_law(const Item& item, Context& context) {
  const auto formula = checked(item, context);
  if (!formula) return std::nullopt;
  ReadLaw law = law_of(*formula, context);
  if (law.at_start && !std::isfinite(*law.at_start)) {
    report_start(item, *law.at_start, "finite", context.problems);
    return std::nullopt;
  }
  return law;
}

std::optional<ReadSd> read_sd(const Item& item, Context& context) {
  if (item.node->is_scalar() && parse_number(item.node->text)) {
    const auto value = read_number(item, above(0), context.problems);
    return value ? std::optional(ReadSd{*value, nullptr}) : std::nullopt;
  }
  const auto formula = checked(item, context);
  if (!formula) return std::nullopt;
  const ReadLaw law = law_of(*formula, context);
  const double at_start = law.at_start.value_or(1.0);
  if (!std::isfinite(at_start) || at_start <= 0.0) {
    report_start(item, at_start, "finite and greater than 0", context.problems);
    return std::nullopt;
  }
  const auto* form = std::get_if<engine::AffineForm>(&law.law);
  return ReadSd{at_start, form != nullptr && is_constant(*form) ? nullptr : formula->formula};
}

}  // namespace steelyard::rig
