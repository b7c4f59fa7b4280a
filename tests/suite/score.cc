// SPDX-License-Identifier: Apache-2.0
#include "suite/score.h"

#include <cmath>

namespace steelyard::suite {

void Score::add(const Machine& machine, const Truth& truth, int step, const Vector& mean, const Vector& sd) {
  if (step < machine.first_judged()) return;
  for (std::size_t k = 0; k < machine.judged.size(); ++k) {
    const Judged& j = machine.judged[k];
    const auto i = static_cast<int>(k);
    double error = mean[i] - truth.state[static_cast<std::size_t>(step)][j.state];
    if (j.turn > 0.0) error = std::remainder(error, j.turn);
    squares += error * error / (j.scale * j.scale);
    covered += std::fabs(error) < 1.96 * sd[i];
    nees += error * error / (sd[i] * sd[i]);
    count += 1.0;
  }
}

void Score::add(const Score& other) {
  squares += other.squares;
  covered += other.covered;
  nees += other.nees;
  count += other.count;
}

Score score(const Run& run, const Track& track) {
  Score out;
  for (int i = 0; i < run.machine.steps; ++i) {
    const auto u = static_cast<std::size_t>(i);
    out.add(run.machine, run.truth, i, track.mean[u], track.sd[u]);
  }
  return out;
}

double ratio(const Score& a, const Score& b) { return std::sqrt(a.squares / b.squares); }

}  // namespace steelyard::suite
