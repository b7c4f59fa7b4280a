// SPDX-License-Identifier: Apache-2.0
// Formulas: values by hand, positions of errors, no allocation once warm, no locale.
#include "rig/formula.h"

#include <gtest/gtest.h>
#include <muParser.h>

#include <atomic>
#include <cmath>
#include <cstdlib>
#include <limits>
#include <locale>
#include <new>
#include <numbers>
#include <string>
#include <thread>
#include <vector>

namespace {

std::atomic<long> allocations{0};

}  // namespace

// Counts what this test program allocates. (Not with the sanitizers' own allocators in the way.)
#if !defined(__SANITIZE_ADDRESS__) && !defined(__SANITIZE_THREAD__)
void* operator new(std::size_t size) {
  ++allocations;
  if (void* memory = std::malloc(size > 0 ? size : 1)) return memory;
  throw std::bad_alloc();
}
void operator delete(void* memory) noexcept { std::free(memory); }
void operator delete(void* memory, std::size_t /*size*/) noexcept { std::free(memory); }
#endif

namespace steelyard::rig {
namespace {

const Scope kScope{{"level", "inflow"}, {"pump"}, {{"area", 120.0}}};

double value_of(std::string_view text, double level, double inflow, double pump, double time_s = 0.0) {
  const CheckedFormula checked = compile_formula(text, kScope);
  if (!checked.formula) {
    ADD_FAILURE() << text << ": " << (checked.errors.empty() ? "?" : checked.errors[0].message);
    return std::numeric_limits<double>::quiet_NaN();
  }
  const std::vector<double> states{level, inflow};
  const std::vector<double> inputs{pump};
  return checked.formula->evaluate(states, inputs, time_s);
}

std::string errors_of(std::string_view text) {
  std::string out;
  for (const FormulaError& error : compile_formula(text, kScope).errors) {
    out += std::to_string(error.position) + ": " + error.message + "\n";
  }
  return out;
}

TEST(Formula, ValuesByHand) {
  EXPECT_DOUBLE_EQ(value_of("(inflow - pump) / area", 0, 0.36, 0.12), 0.002);
  EXPECT_DOUBLE_EQ(value_of("0.001 + 0.02*abs(inflow)", 0, -0.5, 0), 0.011);
  EXPECT_DOUBLE_EQ(value_of("1.84*4*max(level - 4, 0)^1.5", 4.25, 0, 0), 7.36 * 0.125);
  EXPECT_DOUBLE_EQ(value_of("-level^2", 3, 0, 0), -9.0);
  EXPECT_DOUBLE_EQ(value_of("2^3^2", 0, 0, 0), 512.0);
  EXPECT_DOUBLE_EQ(value_of("atan2(level, inflow)", 1, 1, 0), std::numbers::pi / 4);
  EXPECT_DOUBLE_EQ(value_of("level > 1 ? 2.5 : .5e-1", 1, 0, 0), 0.05);
  EXPECT_DOUBLE_EQ(value_of("sqrt(level) + ln(_e) + cos(_pi)", 4, 0, 0), 2.0);
  EXPECT_DOUBLE_EQ(value_of("t / 2", 0, 0, 0, 1.7e9), 8.5e8);
  EXPECT_DOUBLE_EQ(value_of("3", 0, 0, 0), 3.0);
}

TEST(Formula, IsAPureFunctionOfItsArguments) {
  EXPECT_EQ(errors_of("level = 3"), "7: = does not compare; write == to compare\n");
  EXPECT_EQ(errors_of("1, level"), "2: a comma separates arguments of a function; decimals take a point\n");
  EXPECT_EQ(errors_of("max((level, 2))"),
            "11: a comma separates arguments of a function; decimals take a point\n");
}

TEST(Formula, BadArithmeticGivesNumbersThatAreNotFinite) {
  EXPECT_TRUE(std::isnan(value_of("sqrt(level)", -1, 0, 0)));
  EXPECT_TRUE(std::isinf(value_of("1 / level", 0, 0, 0)));
  const CheckedFormula checked = compile_formula("level", kScope);
  EXPECT_TRUE(std::isnan(checked.formula->evaluate(std::vector<double>{1.0}, {}, 0.0)));  // wrong sizes
}

TEST(Formula, EveryUnknownNameIsNamedWithItsPosition) {
  EXPECT_EQ(errors_of("levl + infow"),
            "1: levl is not a state, input, constant or function; did you mean level?\n"
            "8: infow is not a state, input, constant or function; did you mean inflow?\n");
  EXPECT_EQ(errors_of("srqt(level)"),
            "1: srqt is not a state, input, constant or function; did you mean sqrt?\n");
}

TEST(Formula, LengthIsBounded) {
  EXPECT_EQ(errors_of(std::string(kMaxFormulaBytes, '1') + "1"),
            "0: has 1001 characters; at most 1000 are allowed\n");
  std::string deep(499, '(');
  deep += "1" + std::string(499, ')');
  EXPECT_DOUBLE_EQ(value_of(deep, 0, 0, 0), 1.0);
}

TEST(Formula, DoesNotAllocateOnceWarm) {
  const CheckedFormula checked = compile_formula("max(level, 0)^1.5 + sin(inflow)*pump", kScope);
  ASSERT_TRUE(checked.formula);
  const std::vector<double> states{1.0, 2.0};
  const std::vector<double> inputs{3.0};
  double sum = checked.formula->evaluate(states, inputs, 0.0);
  const long before = allocations;
  for (int i = 0; i < 100; ++i) sum += checked.formula->evaluate(states, inputs, i);
  EXPECT_EQ(allocations, before);
  EXPECT_TRUE(std::isfinite(sum));
}

/// Decimals with a comma, as in much of Europe; no such locale need be installed.
struct CommaPoint : std::numpunct<char> {
  char do_decimal_point() const override { return ','; }
  char do_thousands_sep() const override { return '.'; }
  std::string do_grouping() const override { return "\3"; }
};

TEST(Formula, DoesNotDependOnTheLocale) {
  const std::locale before = std::locale::global(std::locale(std::locale::classic(), new CommaPoint));
  const double value = value_of("1.5 + 1000.25*level", 2, 0, 0);
  std::locale::global(before);
  EXPECT_DOUBLE_EQ(value, 2002.0);
}

// muParser keeps one locale for the whole process; somebody else may change it.
TEST(Formula, DoesNotDependOnOtherParsers) {
  mu::Parser other;
  other.SetDecSep('@');
  const double value = value_of("1.5 + 1000.25*level", 2, 0, 0);
  other.ResetLocale();
  EXPECT_DOUBLE_EQ(value, 2002.0);
}

TEST(Formula, ManyThreadsCanCompileAtOnce) {
  std::vector<double> values(4);
  std::vector<std::thread> threads;
  for (std::size_t i = 0; i < values.size(); ++i) {
    threads.emplace_back([&values, i] {
      for (int n = 0; n < 50; ++n) values[i] = value_of("0.5*level + area", 2, 0, 0);
    });
  }
  for (std::thread& thread : threads) thread.join();
  EXPECT_EQ(values, std::vector<double>(4, 121.0));
}

TEST(Formula, WordsOfItsOwnAreKnown) {
  for (const char* word : {"sin", "sqrt", "max", "t", "_pi"}) EXPECT_TRUE(is_formula_word(word)) << word;
  for (const char* word : {"level", "time", "pi", ""}) EXPECT_FALSE(is_formula_word(word)) << word;
}

}  // namespace
}  // namespace steelyard::rig
