// SPDX-License-Identifier: Apache-2.0
// Prints the fault table and fails if a bound is broken.
//   fault_suite [--seeds N] [--fails-every-h H] [--compare-budget] [--only TEXT] [--budget-factor N]
#include <atomic>
#include <cmath>
#include <cstdio>
#include <cstdlib>
#include <cstring>
#include <string>
#include <thread>

#include "suite/runner.h"

namespace steelyard::suite {
namespace {

struct Bounds {
  double geometric_mean = 0.98;
  double row = 1.6;
  double coverage = 0.80;
  double wronged = 0.001;
  double mid_trust = 0.2;
};

std::vector<Result> run_all(const std::vector<Row>& rows, const Settings& settings) {
  std::vector<Result> results(rows.size());
  std::atomic<std::size_t> next{0};
  const auto work = [&] {
    for (std::size_t i = next++; i < rows.size(); i = next++) results[i] = run(rows[i], settings);
  };
  std::vector<std::thread> threads;
  for (unsigned i = 0; i < std::max(1U, std::thread::hardware_concurrency()); ++i) threads.emplace_back(work);
  for (auto& t : threads) t.join();
  return results;
}

double geometric_mean(const std::vector<Result>& results) {
  double sum = 0.0;
  for (const auto& r : results) sum += std::log(r.engine);
  return std::exp(sum / static_cast<double>(results.size()));
}

int print(const std::vector<Row>& rows, const std::vector<Result>& results) {
  const Bounds bounds;
  int broken = 0;
  std::printf("%-24s %8s %7s %7s %8s %7s %6s %7s\n", "fault", "fixed", "engine", "cover", "wronged", "mid",
              "hyps", "us/rd");
  for (std::size_t i = 0; i < rows.size(); ++i) {
    const Result& r = results[i];
    std::string why;
    if (!(r.engine <= bounds.row)) why += " ERROR>";
    if (!(r.coverage >= bounds.coverage)) why += " COVERAGE";
    if (!(r.wronged <= bounds.wronged)) why += " WRONGED";
    if (rows[i].noticeable && !(r.mid_trust < bounds.mid_trust)) why += " UNNOTICED";
    broken += !why.empty();
    std::printf("%-24s %8.2f %7.3f %7.3f %7.3f%% %7.3f %6.1f %7.1f%s\n", rows[i].name.c_str(), r.fixed,
                r.engine, r.coverage, 100 * r.wronged, r.mid_trust, r.hypotheses, r.us_per_reading,
                why.c_str());
  }
  const double mean = geometric_mean(results);
  const bool high = !(mean <= bounds.geometric_mean);
  std::printf("geometric mean %.4f%s\n", mean, high ? " TOO HIGH" : "");
  return broken + high;
}

int compare(const std::vector<Row>& rows, Settings settings) {
  const auto once = run_all(rows, settings);
  settings.budget_factor = 2;
  const auto twice = run_all(rows, settings);
  int broken = 0;
  for (std::size_t i = 0; i < rows.size(); ++i) {
    const double change = twice[i].engine / once[i].engine - 1.0;
    const bool bad = !(std::fabs(change) <= 0.03);
    broken += bad;
    std::printf("%-24s %7.4f %7.4f %+6.2f%%%s\n", rows[i].name.c_str(), once[i].engine, twice[i].engine,
                100 * change, bad ? " CHANGED" : "");
  }
  const double change = geometric_mean(twice) / geometric_mean(once) - 1.0;
  std::printf("geometric mean %.4f %.4f %+.2f%%\n", geometric_mean(once), geometric_mean(twice),
              100 * change);
  return broken + !(std::fabs(change) <= 0.005);
}

}  // namespace
}  // namespace steelyard::suite

int main(int argc, char** argv) {
  using namespace steelyard::suite;
  Settings settings;
  bool compare_budget = false;
  std::string only;
  for (int i = 1; i < argc; ++i) {
    const std::string option = argv[i];
    const auto number = [&] { return i + 1 < argc ? std::atof(argv[++i]) : 0.0; };
    if (option == "--seeds") {
      settings.seeds = static_cast<int>(number());
    } else if (option == "--fails-every-h") {
      settings.fails_every_h = number();
    } else if (option == "--budget-factor") {
      settings.budget_factor = static_cast<int>(number());
    } else if (option == "--compare-budget") {
      compare_budget = true;
    } else if (option == "--only" && i + 1 < argc) {
      only = argv[++i];
    } else {
      std::fprintf(stderr, "fault_suite: %s: is not a known option\n", option.c_str());
      return 2;
    }
  }
  std::vector<Row> rows;
  for (const auto& row : table())
    if (row.name.find(only) != std::string::npos) rows.push_back(row);
  const int broken = compare_budget ? compare(rows, settings) : print(rows, run_all(rows, settings));
  if (broken) std::printf("%d broken\n", broken);
  return broken ? 1 : 0;
}
