// SPDX-License-Identifier: Apache-2.0
#include "suite/runner.h"

#include <algorithm>
#include <chrono>
#include <cmath>

namespace steelyard::suite {
namespace {

using engine::AffineForm;

engine::ChannelModel channel(int j, const Settings& settings) {
  const auto u = static_cast<std::size_t>(j);
  engine::ChannelModel c;
  c.name = kNames[u];
  c.reads = AffineForm{j == 3 ? std::vector<double>{0, 1} : std::vector<double>{1, 0}, {}, 0};
  c.sd = kSd[u];
  c.lo = -kRange[u];
  c.hi = kRange[u];
  c.resolution = kResolution;
  c.fails_every_s = settings.fails_every_h * 3600.0;
  return c;
}

struct Tally {
  double ours = 0.0;
  double told = 0.0;
  double fixed = 0.0;
  double covered = 0.0;
  std::array<double, kChannels> wronged{};
  double mid_trust = 0.0;
  double hypotheses = 0.0;
  double busy_us = 0.0;
  long readings = 0;
};

bool ever_faulty(const Row& row, int channel) {
  return std::any_of(row.faults.begin(), row.faults.end(),
                     [&](const Fault& f) { return f.channel == channel; });
}

void run_seed(const Row& row, const Settings& settings, std::uint64_t seed, Tally& tally) {
  const Truth truth = simulate(seed);
  const Readings readings = read(truth, row, seed);
  engine::Engine machine(axis_model(settings, row));
  std::vector<int> number(kChannels, -1);
  int count = 0;
  for (std::size_t j = 0; j < kChannels; ++j)
    if (row.present[j]) number[j] = count++;
  engine::Estimate estimate;
  std::vector<double> position(kSteps);
  double mid_trust = 0.0;
  const auto begin = std::chrono::steady_clock::now();
  for (int i = 0; i < kSteps; ++i) {
    const engine::TimeNs t = 1'000'000'000LL + i * 20'000'000LL;
    for (std::size_t j = 0; j < kChannels; ++j) {
      const double y = readings.value[j][static_cast<std::size_t>(i)];
      if (std::isnan(y)) continue;
      machine.read(t, number[j], y, engine::Quality::kGood);
      ++tally.readings;
    }
    machine.estimate(t, engine::Detail::kBrief, estimate);
    position[static_cast<std::size_t>(i)] = estimate.states[0].mean;
    tally.hypotheses += estimate.hypotheses / double(kSteps);
    if (i < kFirst) continue;
    const double error = estimate.states[0].mean - truth.position[static_cast<std::size_t>(i)];
    tally.covered += std::fabs(error) < 1.96 * estimate.states[0].sd;
    for (int j = 0; j < kChannels; ++j) {
      const auto u = static_cast<std::size_t>(j);
      if (!row.present[u]) continue;
      const double trust = estimate.channels[static_cast<std::size_t>(number[u])].trust;
      if (!ever_faulty(row, j)) tally.wronged[u] += trust < 0.5;
    }
    for (const auto& f : row.faults)
      if (i == static_cast<int>(0.5 * (f.from_s + f.to_s) / kStepS))
        mid_trust = std::max(
            mid_trust,
            estimate.channels[static_cast<std::size_t>(number[static_cast<std::size_t>(f.channel)])].trust);
  }
  tally.busy_us +=
      std::chrono::duration<double, std::micro>(std::chrono::steady_clock::now() - begin).count();
  const auto square = [](double x) { return x * x; };
  tally.ours += square(rmse(position, truth));
  tally.told += square(rmse(reference(readings, row, true).position, truth));
  tally.fixed += square(rmse(reference(readings, row, false).position, truth));
  tally.mid_trust += mid_trust;
}

}  // namespace

std::shared_ptr<engine::Model> axis_model(const Settings& settings, const Row& row) {
  auto model = std::make_shared<engine::Model>();
  model->states = {{"position", "m", 0.0, 1.0, 0.0, {}, AffineForm{{0, 1}, {}, 0}},
                   {"speed", "m/s", 0.0, 1.0, 0.22, {}, AffineForm{{0, 0}, {}, 0}}};
  for (int j = 0; j < kChannels; ++j)
    if (row.present[static_cast<std::size_t>(j)]) model->channels.push_back(channel(j, settings));
  engine::set_defaults(*model, 1.0);
  model->options.max_hypotheses *= settings.budget_factor;
  model->options.parents *= settings.parents_factor;
  return model;
}

Result run(const Row& row, const Settings& settings) {
  Tally tally;
  for (int s = 1; s <= settings.seeds; ++s) run_seed(row, settings, static_cast<std::uint64_t>(s), tally);
  const double moments = double(settings.seeds) * (kSteps - kFirst);
  Result out;
  out.engine = std::sqrt(tally.ours / tally.told);
  out.fixed = std::sqrt(tally.fixed / tally.told);
  out.coverage = tally.covered / moments;
  out.wronged = *std::max_element(tally.wronged.begin(), tally.wronged.end()) / moments;
  out.mid_trust = row.faults.empty() ? 0.0 : tally.mid_trust / settings.seeds;
  out.hypotheses = tally.hypotheses / settings.seeds;
  out.us_per_reading = tally.busy_us / static_cast<double>(tally.readings);
  return out;
}

}  // namespace steelyard::suite
