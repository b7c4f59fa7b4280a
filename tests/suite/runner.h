// SPDX-License-Identifier: Apache-2.0
// Runs rows: the engine and the reference filters on the same readings, over some seeds and threads.
#pragma once

#include <array>
#include <vector>

#include "suite/declare.h"
#include "suite/references.h"
#include "suite/score.h"

namespace steelyard::suite {

/// What the engine did in one or more seeds of a row; sums over seeds.
struct Watched {
  Score score;
  std::vector<double> wronged;  ///< by channel: judged steps at which a healthy channel's trust was under 0.5
  double steps = 0.0;           ///< judged ones
  double mid_trust = 0.0;       ///< highest trust of a faulty channel at mid-fault
  double notice_s = 0.0;        ///< from a fault's beginning to trust < 0.5; its duration if that never came
  double unnoticed = 0.0;       ///< seeds in which it never came
  double busy_us = 0.0;
  double readings = 0.0;
  double hypotheses = 0.0;  ///< mean of a seed
  double seeds = 0.0;

  void add(const Watched& other);
};

struct Outcome {
  Watched engine;
  std::array<Score, kReferences> reference;
  void add(const Outcome& other);
};

/// One row of the table.
struct Result {
  const Machine* machine = nullptr;
  const Row* row = nullptr;
  double to_told = 0.0;                      ///< RMSE ratio of the engine
  double to_informed = 0.0;                  ///< RMSE ratio of the engine
  std::array<double, kReferences> others{};  ///< RMSE ratio of each reference to told
  double coverage = 0.0;                     ///< of the engine's 95 % intervals
  double told_coverage = 0.0;
  double nees = 0.0;  ///< mean normalised square of the errors: 1 is right
  double told_nees = 0.0;
  double wronged = 0.0;    ///< largest share of time in which a healthy channel's trust is under 0.5
  double mid_trust = 0.0;  ///< mean over seeds of the faulty channels' highest trust at mid-fault
  double notice_s = 0.0;   ///< mean over seeds of the slowest fault's time to trust < 0.5
  bool always_noticed = true;
  double hypotheses = 0.0;
  double us_per_reading = 0.0;
};

[[nodiscard]] Watched watch(const Run& run, const Settings& settings);
[[nodiscard]] Outcome run_seed(const Machine& machine, const Row& row, const Settings& settings,
                               std::uint64_t seed);

struct Job {
  const Machine* machine;
  const Row* row;
};
/// Seeds 1 to settings.seeds of every job, over this many threads. The result does not depend on their
/// number.
[[nodiscard]] std::vector<Result> run_all(const std::vector<Job>& jobs, const Settings& settings,
                                          unsigned threads);

}  // namespace steelyard::suite
