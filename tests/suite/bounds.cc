// SPDX-License-Identifier: Apache-2.0
#include "suite/bounds.h"

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <limits>

namespace steelyard::suite {
namespace {

constexpr double kHighestCoverage = 0.99;
constexpr double kWronged = 0.001;
constexpr double kMidTrust = 0.2;
constexpr double kMeanQuick = 0.92;
constexpr double kMeanSlow = 0.98;
constexpr double kMeanInformed = 1.10;

void check(std::vector<std::string>& out, bool holds, const char* name, double bound) {
  if (holds) return;
  std::array<char, 64> text{};
  std::snprintf(text.data(), text.size(), "%s%.4g", name, bound);
  out.emplace_back(text.data());
}

}  // namespace

double error_bound(Class what) {
  switch (what) {
    case Class::kHealthy:
    case Class::kSingle:
      return 1.2;
    case Class::kPair:
      return 1.4;
    case Class::kCreep:
    case Class::kWrong:
      return 1.6;
    case Class::kAmbiguous:
      break;
  }
  return std::numeric_limits<double>::infinity();
}

double lowest_coverage(const Result& r) {
  return r.row->slow_on_best ? 0.80 : std::min(0.90, r.told_coverage - 0.02);
}

// Written so that a value that is not a number breaks the bound.
std::vector<std::string> breaches(const Result& r) {
  std::vector<std::string> out;
  const Class what = r.row->what;
  if (const double bound = error_bound(what); std::isfinite(bound))
    check(out, r.to_told <= bound, "error>", bound);
  check(out, r.coverage <= kHighestCoverage, "coverage>", kHighestCoverage);
  check(out, r.coverage >= lowest_coverage(r), "coverage<", lowest_coverage(r));
  if (what == Class::kAmbiguous) return out;
  check(out, r.wronged <= kWronged, "wronged>", kWronged);
  if (r.row->noticeable) check(out, r.mid_trust < kMidTrust, "mid-trust>", kMidTrust);
  return out;
}

Summary summarise(const Machine& machine, const std::vector<Result>& results) {
  Summary s;
  s.machine = &machine;
  double told = 0.0;
  double informed = 0.0;
  int counted = 0;
  for (const auto& r : results) {
    if (r.machine != &machine) continue;
    ++s.rows;
    s.broken += !breaches(r).empty();
    s.us_per_reading += r.us_per_reading;
    if (!std::isfinite(error_bound(r.row->what))) continue;
    ++counted;
    told += std::log(r.to_told);
    informed += std::log(r.to_informed);
    for (std::size_t k = 0; k < kReferences; ++k) s.others[k] += std::log(r.others[k]);
    if (!(r.to_told <= s.worst)) {
      s.worst = r.to_told;
      s.worst_row = r.row;
    }
  }
  const double n = std::max(1, counted);
  s.to_told = std::exp(told / n);
  s.to_informed = std::exp(informed / n);
  for (auto& o : s.others) o = std::exp(o / n);
  s.us_per_reading /= std::max(1, s.rows);
  return s;
}

std::vector<std::string> breaches(const Summary& s) {
  std::vector<std::string> out;
  const double bound = s.machine->quick ? kMeanQuick : kMeanSlow;
  check(out, s.to_told <= bound, "mean>", bound);
  check(out, s.to_informed <= kMeanInformed, "to informed>", kMeanInformed);
  return out;
}

}  // namespace steelyard::suite
