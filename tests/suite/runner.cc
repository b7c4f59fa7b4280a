// SPDX-License-Identifier: Apache-2.0
#include "suite/runner.h"

#include <algorithm>
#include <atomic>
#include <thread>

#include "suite/faults.h"

namespace steelyard::suite {
namespace {

Result summarise(const Job& job, const Outcome& o) {
  const auto& told = o.reference[static_cast<std::size_t>(Reference::kTold)];
  const auto& informed = o.reference[static_cast<std::size_t>(Reference::kInformed)];
  const Watched& e = o.engine;
  Result r;
  r.machine = job.machine;
  r.row = job.row;
  r.to_told = ratio(e.score, told);
  r.to_informed = ratio(e.score, informed);
  for (std::size_t k = 0; k < kReferences; ++k) r.others[k] = ratio(o.reference[k], told);
  r.coverage = e.score.covered / e.score.count;
  r.told_coverage = told.covered / told.count;
  r.nees = e.score.nees / e.score.count;
  r.told_nees = told.nees / told.count;
  r.wronged = *std::max_element(e.wronged.begin(), e.wronged.end()) / e.steps;
  r.mid_trust = e.mid_trust / e.seeds;
  r.notice_s = e.notice_s / e.seeds;
  r.always_noticed = e.unnoticed == 0.0;
  r.hypotheses = e.hypotheses / e.seeds;
  r.us_per_reading = e.busy_us / e.readings;
  return r;
}

}  // namespace

void Watched::add(const Watched& other) {
  score.add(other.score);
  wronged.resize(other.wronged.size());
  for (std::size_t j = 0; j < wronged.size(); ++j) wronged[j] += other.wronged[j];
  steps += other.steps;
  mid_trust += other.mid_trust;
  notice_s += other.notice_s;
  unnoticed += other.unnoticed;
  busy_us += other.busy_us;
  readings += other.readings;
  hypotheses += other.hypotheses;
  seeds += other.seeds;
}

void Outcome::add(const Outcome& other) {
  engine.add(other.engine);
  for (std::size_t k = 0; k < kReferences; ++k) reference[k].add(other.reference[k]);
}

Outcome run_seed(const Machine& machine, const Row& row, const Settings& settings, std::uint64_t seed) {
  const Truth truth = machine.simulate(seed, row.at_rest);
  const Row fixed = resolved(machine, row, truth);
  const Readings readings = read(machine, truth, fixed, seed);
  const Run run = make_run(machine, fixed, truth, readings);
  Outcome out;
  out.engine = watch(run, settings);
  for (std::size_t k = 0; k < kReferences; ++k)
    out.reference[k] = score(run, reference(run, static_cast<Reference>(k)));
  return out;
}

std::vector<Result> run_all(const std::vector<Job>& jobs, const Settings& settings, unsigned threads) {
  const auto seeds = static_cast<std::size_t>(settings.seeds);
  std::vector<Outcome> outcomes(jobs.size() * seeds);
  std::atomic<std::size_t> next{0};
  const auto work = [&] {
    for (std::size_t i = next++; i < outcomes.size(); i = next++) {
      const Job& job = jobs[i / seeds];
      outcomes[i] = run_seed(*job.machine, *job.row, settings, i % seeds + 1);
    }
  };
  std::vector<std::jthread> pool;
  for (unsigned i = 0; i < std::max(1U, threads); ++i) pool.emplace_back(work);
  pool.clear();
  std::vector<Result> results;
  for (std::size_t j = 0; j < jobs.size(); ++j) {
    Outcome sum;
    for (std::size_t s = 0; s < seeds; ++s) sum.add(outcomes[j * seeds + s]);
    results.push_back(summarise(jobs[j], sum));
  }
  return results;
}

}  // namespace steelyard::suite
