// SPDX-License-Identifier: Apache-2.0
// fault_suite: prints the fault table of all machines. Exit 0 when every bound holds, 1 when one is broken, 2
// when it is used wrongly. See README.md in this folder.
#include <CLI/CLI.hpp>
#include <cstdio>
#include <exception>
#include <string>
#include <thread>

#include "suite/fit.h"
#include "suite/table.h"

namespace steelyard::suite {
namespace {

struct Options {
  Settings settings;
  std::string machine;
  std::string only;
  std::string page;
  unsigned jobs = std::max(1U, std::thread::hardware_concurrency());
  bool compare_budget = false;
  bool compare_parents = false;
  bool fit = false;
};

std::vector<Job> chosen(const Options& o) {
  std::vector<Job> jobs;
  for (const auto& m : machines()) {
    if (!o.machine.empty() && m.name != o.machine) continue;
    for (const auto& row : m.rows)
      if (row.name.find(o.only) != std::string::npos) jobs.push_back({&m, &row});
  }
  return jobs;
}

int run(const Options& o) {
  if (!o.machine.empty()) static_cast<void>(machine(o.machine));
  if (o.fit) {
    for (const auto& m : machines())
      if (o.machine.empty() || m.name == o.machine) print_fit(m, o.settings.seeds);
    return 0;
  }
  const auto jobs = chosen(o);
  if (jobs.empty()) throw std::out_of_range("--only " + o.only + ": no row has this in its name");
  const auto results = run_all(jobs, o.settings, o.jobs);
  int broken = 0;
  if (o.compare_budget || o.compare_parents) {
    Settings twice = o.settings;
    if (o.compare_budget) twice.budget_factor *= 2;
    if (o.compare_parents) twice.parents_factor *= 2;
    broken = print_comparison(results, run_all(jobs, twice, o.jobs));
  } else {
    broken = print_table(results);
  }
  if (!o.page.empty()) write_page(o.page, results, o.settings);
  std::printf("%d broken\n", broken);
  return broken > 0 ? 1 : 0;
}

}  // namespace
}  // namespace steelyard::suite

int main(int argc, char** argv) {
  using namespace steelyard::suite;
  Options o;
  CLI::App app("Judges the engine on rows of faults of several machines");
  app.add_option("--seeds", o.settings.seeds, "runs of each row")
      ->check(CLI::Range(1, 1000))
      ->capture_default_str();
  app.add_option("--machine", o.machine, "this machine alone");
  app.add_option("--only", o.only, "rows with this in their name");
  app.add_option("--fails-every-h", o.settings.fails_every_h,
                 "declared fault rate, where a row has none of its own")
      ->check(CLI::PositiveNumber)
      ->capture_default_str();
  app.add_option("--budget-factor", o.settings.budget_factor, "hypotheses kept, times this")
      ->check(CLI::Range(1, 64));
  app.add_option("--parents-factor", o.settings.parents_factor, "parents, times this")
      ->check(CLI::Range(1, 64));
  app.add_flag("--compare-budget", o.compare_budget, "run with twice the hypotheses as well and compare");
  app.add_flag("--compare-parents", o.compare_parents, "run with twice the parents as well and compare");
  app.add_option("--html", o.page, "write the table as a page to this file");
  app.add_option("--jobs", o.jobs, "threads")->check(CLI::Range(1U, 256U))->capture_default_str();
  app.add_flag("--fit", o.fit,
               "print how the references' process noise fits the runs without faults, and end");
  try {
    app.parse(argc, argv);
  } catch (const CLI::ParseError& e) {
    return app.exit(e) == 0 ? 0 : 2;
  }
  try {
    return run(o);
  } catch (const std::out_of_range& e) {
    std::fprintf(stderr, "fault_suite: %s\n", e.what());
    return 2;
  } catch (const std::exception& e) {
    std::fprintf(stderr, "fault_suite: %s\n", e.what());
    return 1;
  }
}
