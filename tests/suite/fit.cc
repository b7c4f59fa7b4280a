// SPDX-License-Identifier: Apache-2.0
#include "suite/fit.h"

#include <cmath>
#include <cstdio>

#include "suite/score.h"

namespace steelyard::suite {
namespace {

void print(const char* what, const Vector& unrest, double error) {
  std::printf("  %-8s", what);
  for (const double u : unrest) std::printf(" %.4g", u);
  std::printf("  error %.5f\n", error);
}

}  // namespace

double fit_error(const Machine& machine, const Vector& unrest, int seeds) {
  const Row none;
  Score sum;
  for (int seed = 1; seed <= seeds; ++seed) {
    const auto s = static_cast<std::uint64_t>(seed);
    const Truth truth = machine.simulate(s, false);
    const Readings readings = read(machine, truth, none, s);
    Run run = make_run(machine, none, truth, readings);
    run.unrest = unrest;
    sum.add(score(run, reference(run, Reference::kFixed)));
  }
  return std::sqrt(sum.squares / sum.count);
}

void print_fit(const Machine& machine, int seeds) {
  std::printf("%s: per √s, by state\n", machine.name.c_str());
  Vector best = machine.filter.unrest;
  double least = fit_error(machine, best, seeds);
  print("now", best, least);
  for (const double factor : {2.0, std::sqrt(2.0), std::sqrt(std::sqrt(2.0))}) {
    for (bool better = true; better;) {
      better = false;
      for (int i = 0; i < best.size(); ++i)
        for (const double step : {factor, 1.0 / factor}) {
          Vector next = best;
          next[i] *= step;
          const double error = next[i] > 0.0 ? fit_error(machine, next, seeds) : least;
          if (!(error < least * (1.0 - 1e-4))) continue;
          best = next;
          least = error;
          better = true;
          print("better", best, least);
        }
    }
  }
}

}  // namespace steelyard::suite
