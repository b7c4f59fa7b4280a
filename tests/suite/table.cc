// SPDX-License-Identifier: Apache-2.0
#include "suite/table.h"

#include <algorithm>
#include <cmath>
#include <cstdio>

namespace steelyard::suite {
namespace {

constexpr double kRowMayChange = 0.03;
constexpr double kMeanMayChange = 0.005;

double other(const std::array<double, kReferences>& others, Reference which) {
  return others[static_cast<std::size_t>(which)];
}

void print_others(const std::array<double, kReferences>& others) {
  for (const auto which : {Reference::kFixed, Reference::kGated, Reference::kMedian, Reference::kVariational})
    std::printf(" %7.2f", std::min(other(others, which), 9999.0));
}

void print_head() {
  std::printf("%-46s %6s %6s %7s %7s %7s %7s %6s %6s %6s %7s %8s %6s %6s\n", "", "told", "inform", "fixed",
              "gated", "mid", "variat", "cover", "(told)", "NEES", "notice", "wronged", "midtr", "us/rd");
}

void print_row(const Result& r) {
  std::printf("%-46s %6.3f %6.3f", r.row->name.c_str(), r.to_told, r.to_informed);
  print_others(r.others);
  std::printf(" %6.3f %6.3f %6.2f", r.coverage, r.told_coverage, r.nees);
  if (r.row->faults.empty()) {
    std::printf(" %7s", "");
  } else {
    std::printf(" %s%6.1f", r.always_noticed ? " " : ">", r.notice_s);
  }
  std::printf(" %7.3f%%", 100.0 * r.wronged);
  if (r.row->faults.empty()) {
    std::printf(" %6s", "");
  } else {
    std::printf(" %6.3f", r.mid_trust);
  }
  std::printf(" %6.1f  %s\n", r.us_per_reading, joined(breaches(r)).c_str());
}

void print_summary(const Summary& s) {
  std::printf("%-46s %6.3f %6.3f", "geometric mean", s.to_told, s.to_informed);
  print_others(s.others);
  std::printf("   worst %.3f (%s); %d of %d rows hold  %s\n", s.worst,
              s.worst_row ? s.worst_row->name.c_str() : "-", s.rows - s.broken, s.rows,
              joined(breaches(s)).c_str());
}

}  // namespace

std::string joined(const std::vector<std::string>& parts) {
  std::string out;
  for (const auto& p : parts) out += (out.empty() ? "" : " ") + p;
  return out;
}

std::vector<const Machine*> machines_of(const std::vector<Result>& results) {
  std::vector<const Machine*> out;
  for (const auto& r : results)
    if (std::find(out.begin(), out.end(), r.machine) == out.end()) out.push_back(r.machine);
  return out;
}

int print_table(const std::vector<Result>& results) {
  int broken = 0;
  for (const Machine* m : machines_of(results)) {
    std::printf("%s: %s\n", m->name.c_str(), m->about.c_str());
    print_head();
    for (const auto& r : results)
      if (r.machine == m) print_row(r);
    const Summary s = summarise(*m, results);
    print_summary(s);
    std::printf("\n");
    broken += s.broken + static_cast<int>(breaches(s).size());
  }
  return broken;
}

int print_comparison(const std::vector<Result>& once, const std::vector<Result>& twice) {
  int broken = 0;
  for (const Machine* m : machines_of(once)) {
    std::printf("%s\n", m->name.c_str());
    for (std::size_t i = 0; i < once.size(); ++i) {
      if (once[i].machine != m) continue;
      const double change = twice[i].to_told / once[i].to_told - 1.0;
      const bool bad = !(std::fabs(change) <= kRowMayChange);
      broken += bad;
      std::printf("%-46s %7.4f %7.4f %+6.2f%%%s\n", once[i].row->name.c_str(), once[i].to_told,
                  twice[i].to_told, 100.0 * change, bad ? " changed" : "");
    }
    const double before = summarise(*m, once).to_told;
    const double after = summarise(*m, twice).to_told;
    const bool bad = !(std::fabs(after / before - 1.0) <= kMeanMayChange);
    broken += bad;
    std::printf("%-46s %7.4f %7.4f %+6.2f%%%s\n\n", "geometric mean", before, after,
                100.0 * (after / before - 1.0), bad ? " changed" : "");
  }
  return broken;
}

}  // namespace steelyard::suite
