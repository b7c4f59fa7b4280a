// SPDX-License-Identifier: Apache-2.0
// Which formulas count as affine, and that their coefficients are exact.
#include "rig/affine.h"

#include <gtest/gtest.h>

#include <array>
#include <cmath>
#include <optional>
#include <random>
#include <string>
#include <string_view>
#include <vector>

#include "rig/formula.h"
#include "rig/number.h"

namespace steelyard::rig {
namespace {

const Scope kScope{{"level", "inflow"}, {"pump"}, {{"area", 120.0}, {"tiny", 1e-9}}};
constexpr std::array<Region, 2> kStates{{{2.0, 1.0}, {0.1, 0.2}}};
constexpr std::array<Region, 1> kInputs{{{0.075, 0.025}}};

std::optional<engine::AffineForm> affine(std::string_view text) {
  const CheckedFormula checked = compile_formula(text, kScope);
  EXPECT_TRUE(checked.formula) << text;
  return checked.formula ? find_affine(*checked.formula, kStates, kInputs) : std::nullopt;
}

void expect_form(std::string_view text, double level, double inflow, double pump, double constant) {
  const auto form = affine(text);
  ASSERT_TRUE(form) << text;
  EXPECT_EQ(form->on_states, (std::vector<double>{level, inflow})) << text;
  EXPECT_EQ(form->on_inputs, std::vector<double>{pump}) << text;
  EXPECT_EQ(form->constant, constant) << text;
}

TEST(Affine, CoefficientsAreExact) {
  expect_form("level", 1, 0, 0, 0);
  expect_form("level - 0.15", 1, 0, 0, -0.15);
  expect_form("0.1*level + 0.7*inflow - 0.3*pump + 0.9", 0.1, 0.7, -0.3, 0.9);
  expect_form("(inflow - pump) / area", 0, 1 / 120.0, -1 / 120.0, 0);
  expect_form("1e6 + 0.001*level", 0.001, 0, 0, 1e6);
  expect_form("-(level + 2*inflow)*3", -3, -6, 0, 0);
  expect_form("(level - 0.5)*0.7 + 3*0.1*inflow", 0.7, 0.3, 0, -0.35);
  expect_form("0.7*(0.3*level + 1.1*pump)/0.9*9", 2.1, 0, 7.7, 0);
  expect_form("42", 0, 0, 0, 42);
  expect_form("0*level", 0, 0, 0, 0);
  expect_form("level^1", 1, 0, 0, 0);
}

TEST(Affine, BendsAreFoundWhereverTheyAre) {
  for (const std::string_view text :
       {"level^2", "level*inflow", "pump*level", "abs(level)", "max(level, 0)", "max(level - 4.2, 0)",
        "sqrt(level)", "sin(level)", "level + tiny*inflow^2", "level + tiny*sin(level)", "exp(level)",
        "1/level", "rint(level)", "sign(level)", "level + 1e-6*abs(inflow - 0.1)", "min(level, 5)",
        "min(level, 1e5)", "level*1e300*1e300", "0/level"}) {
    EXPECT_FALSE(affine(text)) << text;
  }
}

// Against the obvious: random coefficients written into a formula come back as the same numbers.
TEST(Affine, RandomCoefficientsComeBack) {
  constexpr unsigned kSeed = 4;
  std::mt19937_64 random(kSeed);
  std::uniform_int_distribution<int> digits(-999, 999);
  std::uniform_int_distribution<int> exponent(-6, 3);
  for (int i = 0; i < 300; ++i) {
    const auto number = [&] {
      return std::to_string(digits(random)) + "e" + std::to_string(exponent(random));
    };
    const std::string a = number();
    const std::string b = number();
    const std::string c = number();
    const std::string text = a + "*level + (" + b + ")*pump + (" + c + ")";
    const auto form = affine(text);
    ASSERT_TRUE(form) << "seed " << kSeed << ": " << text;
    EXPECT_EQ(form->on_states[0], parse_number(a)) << "seed " << kSeed << ": " << text;
    EXPECT_EQ(form->on_inputs[0], parse_number(b)) << "seed " << kSeed << ": " << text;
    EXPECT_EQ(form->constant, parse_number(c)) << "seed " << kSeed << ": " << text;
  }
}

// A bump of 1 around 200: points of all sizes would miss it, points where the machine is do not.
TEST(Affine, BendsWhereTheMachineIsAreFound) {
  const CheckedFormula checked = compile_formula("level + max(0, 1 - abs(level - 200))", kScope);
  ASSERT_TRUE(checked.formula);
  const std::array<Region, 2> there{{{200.0, 0.2}, {0.1, 0.2}}};
  EXPECT_FALSE(find_affine(*checked.formula, there, kInputs));
}

}  // namespace
}  // namespace steelyard::rig
