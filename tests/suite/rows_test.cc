// SPDX-License-Identifier: Apache-2.0
// Runs rows and asserts their bounds: a few of each machine quickly, and the trolley's oldest ones in full.
// The whole table is run by hand (README.md): it holds promises that the engine does not keep yet.
#include <gtest/gtest.h>

#include <cmath>
#include <thread>

#include "suite/bounds.h"
#include "suite/table.h"

namespace steelyard::suite {
namespace {

unsigned threads() { return std::max(1U, std::thread::hardware_concurrency()); }

struct Listed {
  const char* machine;
  const char* row;
};

// One of each kind of fault, on machines and channels where it holds.
constexpr Listed kHeld[] = {
    {"trolley", "none"},
    {"trolley", "frozen on a"},
    {"trolley", "stuck with noise on d"},
    {"trolley", "hold with jitter on a"},
    {"trolley", "offset 20 sd on a"},
    {"trolley", "offset 4 sd on d"},
    {"trolley", "drift 2 sd/s on d"},
    {"trolley", "noise x10 on a"},
    {"trolley", "10 % strays on a"},
    {"trolley", "garbage on a"},
    {"trolley", "silence on d"},
    {"trolley", "offset a + frozen d"},
    {"trolley", "a,b: offset a"},
    {"trolley", "none, at rest, a and b with steps of 2 sd"},
    {"basin", "offset 10 sd on radar"},
    {"basin", "drift 1 sd/R on radar"},
    {"basin", "frozen on meter"},
    {"basin", "foam on radar and sonic"},
    {"basin", "offset 10 sd on sonic at a set-point change"},
    {"basin", "radar, cell alone: offset 20 sd on cell"},
    {"cart", "none"},
    {"cart", "frozen on west"},
    {"cart", "offset 20 sd on fix"},
    {"cart", "scale x1.15 on odometer"},
    {"cart", "frozen on compass"},
    {"cart", "garbage on west"},
    {"cart", "offset west + frozen odometer"},
    {"plant", "none"},
    {"plant", "frozen on p1"},
    {"plant", "offset 10 sd on p1"},
    {"plant", "drift 1 sd/R on p1"},
    {"plant", "on-off 30 sd on j1"},
    {"plant", "offset p1 + offset p2"},
};

const Row& row_of(const Machine& m, const std::string& name) {
  for (const Row& row : m.rows)
    if (row.name == name) return row;
  throw std::out_of_range(m.name + ": " + name + ": there is no row of this name");
}

TEST(Rows, TheseHold) {
  std::vector<Job> jobs;
  for (const Listed& l : kHeld) {
    const Machine& m = machine(l.machine);
    jobs.push_back({&m, &row_of(m, l.row)});
  }
  Settings settings;
  settings.seeds = 1;
  for (const Result& r : run_all(jobs, settings, threads()))
    EXPECT_TRUE(breaches(r).empty()) << r.machine->name << ": " << r.row->name << ": " << joined(breaches(r))
                                     << " (seed 1, error " << r.to_told << ", coverage " << r.coverage << ")";
}

// The bounds of the suite's first years, so that nothing is lost on the way to the present ones.
TEST(OldestRows, AreAsGoodAsTheyWere) {
  constexpr std::size_t kOldest = 42;
  const Machine& m = machine("trolley");
  std::vector<Job> jobs;
  for (std::size_t i = 0; i < kOldest; ++i) jobs.push_back({&m, &m.rows[i]});
  const auto results = run_all(jobs, {}, threads());
  for (const Result& r : results) {
    EXPECT_LE(r.to_told, 1.6) << r.row->name;
    EXPECT_GE(r.coverage, 0.80) << r.row->name;
    EXPECT_LE(r.wronged, 0.001) << r.row->name;
    if (r.row->noticeable) {
      EXPECT_LT(r.mid_trust, 0.2) << r.row->name;
    }
  }
  EXPECT_LE(summarise(m, results).to_told, 0.98);
}

}  // namespace
}  // namespace steelyard::suite
