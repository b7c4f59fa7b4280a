// SPDX-License-Identifier: Apache-2.0
// Is the engine honest about a machine that is exactly as it assumes? Everything is drawn from its own
// generative model (prior.h). The truth of stated probabilities is counted at every moment, for doubt is
// short; coverage of states and intervals at moments 0.5 R apart.
//   prior_calibration [--runs N] [--seed S] [--length_s L] [--forget 1] [--hypotheses K] [--parents P]
//   [--known 1]
// forget 0 switches the forgetting of noise off: precisions are constant here, so that is the exact prior.
// A coverage is broken where it is beyond its bound by more than two standard errors. A bin counts where its
// standard error over runs is at most 0.02; then it must be within 0.05.
#include <cmath>
#include <cstdio>
#include <string>
#include <vector>

#include "engine/engine.h"
#include "judges/judge.h"
#include "judges/prior.h"
#include "judges/reliability.h"

namespace steelyard::judges {
namespace {

using engine::Condition;

constexpr double kStepS = 0.05;
constexpr int kEvery = 10;        // moments between looks
constexpr int kFirst = 60;        // the first looked at
constexpr double kEnough = 0.02;  // standard error from which a figure is judged
constexpr double kSurely = 2.0;   // standard errors beyond a bound from which it is broken
constexpr double kBinWithin = 0.05;
constexpr double kTwoSided90 = 1.6448536269514722;
constexpr std::array<const char*, engine::kConditions> kConditionNames{"sound",     "creeping", "offset",
                                                                       "wandering", "stuck",    "frozen"};
constexpr engine::TimeNs kBegin = 1'000'000'000;

struct Tally {
  std::array<Rate, 2> covered95;
  std::array<Rate, 2> covered90;  ///< by the mixture's interval
  std::array<Rate, 3> modes;
  std::vector<Reliability> stated;
  std::array<Rate, engine::kConditions> noise;   ///< 90 % interval of noise_sd, by true condition
  std::array<Rate, engine::kConditions> offset;  ///< 90 % interval of the offset, by true condition
  std::vector<Rate> noise_by_channel;            ///< of sound channels, and on which side the interval missed
  std::vector<Rate> noise_above;

  explicit Tally(std::size_t channels) : noise_by_channel(channels), noise_above(channels) {
    for (const char* name : kConditionNames) stated.push_back({name, {}, {}});
  }
  void end_run() {
    for (auto* group : {&noise, &offset})
      for (Rate& r : *group) r.end_run();
    for (auto* group : {&noise_by_channel, &noise_above})
      for (Rate& r : *group) r.end_run();
    for (Rate& r : covered95) r.end_run();
    for (Rate& r : covered90) r.end_run();
    for (Rate& r : modes) r.end_run();
    for (Reliability& r : stated) r.end_run();
  }
};

void look_at_conditions(const engine::Estimate& e, const PriorMachine& machine, Tally& tally) {
  for (std::size_t j = 0; j < e.channels.size(); ++j)
    for (std::size_t k = 0; k < engine::kConditions; ++k)
      tally.stated[k].add(e.channels[j].probability[k],
                          machine.channel(static_cast<int>(j)).condition == static_cast<Condition>(k));
}

void look_at_channel(std::size_t j, const engine::ChannelEstimate& e, const ChannelTruth& truth,
                     Tally& tally) {
  const auto c = static_cast<std::size_t>(truth.condition);
  // Intervals of what a channel in the condition has are only meant where the engine believes in it.
  if (e.probability[c] < 0.5) return;
  if (truth.condition != Condition::kFrozen)
    tally.noise[c].add(e.noise_sd90.lo <= truth.noise_sd && truth.noise_sd <= e.noise_sd90.hi, 0.90);
  if (truth.condition == Condition::kSound) {
    tally.noise_by_channel[j].add(e.noise_sd90.lo <= truth.noise_sd && truth.noise_sd <= e.noise_sd90.hi,
                                  0.90);
    tally.noise_above[j].add(truth.noise_sd > e.noise_sd90.hi, 0.05);
  }
  const bool walks = truth.condition != Condition::kSound && truth.condition != Condition::kStuck &&
                     truth.condition != Condition::kFrozen;
  if (walks) tally.offset[c].add(std::fabs(e.offset - truth.own) < kTwoSided90 * e.offset_sd, 0.90);
}

void look(const engine::Estimate& e, const PriorMachine& machine, Tally& tally) {
  for (std::size_t i = 0; i < 2; ++i) {
    const auto& s = e.states[i];
    const double x = machine.state(static_cast<int>(i));
    tally.covered95[i].add(std::fabs(s.mean - x) < 1.96 * s.sd, 0.95);
    tally.covered90[i].add(s.interval90.lo <= x && x <= s.interval90.hi, 0.90);
  }
  for (std::size_t m = 0; m < 3; ++m)
    tally.modes[m].add(machine.mode() == static_cast<engine::Mode>(m), e.mode[m]);
  for (std::size_t j = 0; j < e.channels.size(); ++j)
    look_at_channel(j, e.channels[j], machine.channel(static_cast<int>(j)), tally);
}

void run(const std::shared_ptr<const engine::Model>& model, std::uint64_t seed, int steps, Tally& tally) {
  PriorMachine machine(*model, seed);
  engine::Engine engine(model);
  engine::Estimate e;
  for (int i = 0; i < steps; ++i) {
    machine.step(i == 0 ? 0.0 : kStepS);
    const engine::TimeNs t = kBegin + i * static_cast<engine::TimeNs>(kStepS * 1e9);
    for (int j = 0; j < static_cast<int>(model->channels.size()); ++j)
      engine.read(t, j, machine.channel(j).shown, engine::Quality::kGood);
    if (i < kFirst) continue;
    const bool full = i % kEvery == 0;
    engine.estimate(t, full ? engine::Detail::kFull : engine::Detail::kBrief, e);
    look_at_conditions(e, machine, tally);
    if (full) look(e, machine, tally);
  }
  tally.end_run();
}

void judge_coverage(const std::string& what, const Rate& rate, double lo, double hi, Bounds& bounds,
                    bool known = false) {
  if (rate.cases() == 0) return;
  std::printf("%-28s %8ld cases %6ld runs   %.4f (se %.4f), %.2f to %.2f\n", what.c_str(), rate.cases(),
              rate.runs(), rate.observed(), rate.standard_error(), lo, hi);
  if (rate.standard_error() > kEnough) return;
  const double margin = kSurely * rate.standard_error();
  bounds.require(rate.observed() >= lo - margin && rate.observed() <= hi + margin,
                 format("%s: %.4f; must be from %.2f to %.2f", what.c_str(), rate.observed(), lo, hi), known);
}

// Wandering and a fast offset look alike, and a repeat counts the learned rate wherever it falls.
bool known_off(const std::string& condition) { return condition == "wandering" || condition == "frozen"; }

void judge_bin(const std::string& of, const char* range, const Rate& bin, Bounds& bounds) {
  if (bin.cases() == 0) return;
  const double off = bin.observed() - bin.expected();
  const bool enough = bin.standard_error() <= kEnough;
  std::printf("  %-8s %8ld cases %6ld runs  stated %.4f  came true %.4f  off %+.4f (se %.4f)%s\n", range,
              bin.cases(), bin.runs(), bin.expected(), bin.observed(), off, bin.standard_error(),
              enough ? "" : "  few");
  bounds.require(
      !enough || std::fabs(off) <= kBinWithin,
      format("P(%s), %s: stated %.3f, came true %.3f", of.c_str(), range, bin.expected(), bin.observed()),
      known_off(of));
}

void judge_reliability(const Reliability& r, Bounds& bounds) {
  std::printf("P(%s)\n", r.name.c_str());
  for (std::size_t b = 0; b < r.bins.size(); ++b)
    judge_bin(r.name,
              format("%.1f-%.1f", 0.1 * static_cast<double>(b), 0.1 * static_cast<double>(b + 1)).c_str(),
              r.bins[b], bounds);
  judge_bin(r.name, "doubt", r.doubt, bounds);
}

// A walk hides the noise: the variational update counts its readings in full.
bool learns_little_of_noise(std::size_t condition) {
  return condition == static_cast<std::size_t>(Condition::kOffset) ||
         condition == static_cast<std::size_t>(Condition::kWandering);
}

void judge(const engine::Model& model, const Tally& tally, Bounds& bounds) {
  for (std::size_t i = 0; i < 2; ++i) {
    judge_coverage("95 % of " + model.states[i].name, tally.covered95[i], 0.93, 0.97, bounds);
    judge_coverage("90 % interval of " + model.states[i].name, tally.covered90[i], 0.85, 0.95, bounds);
  }
  for (std::size_t k = 0; k < engine::kConditions; ++k) {
    judge_coverage(std::string("90 % of noise, ") + kConditionNames[k], tally.noise[k], 0.85, 0.95, bounds,
                   learns_little_of_noise(k));
    judge_coverage(std::string("90 % of offset, ") + kConditionNames[k], tally.offset[k], 0.85, 0.95, bounds);
  }
  for (std::size_t j = 0; j < tally.noise_by_channel.size(); ++j)
    std::printf("  noise of sound %s: %.4f within (se %.4f), %.4f above, %.4f below\n",
                model.channels[j].name.c_str(), tally.noise_by_channel[j].observed(),
                tally.noise_by_channel[j].standard_error(), tally.noise_above[j].observed(),
                1.0 - tally.noise_by_channel[j].observed() - tally.noise_above[j].observed());
  for (const auto& r : tally.stated) judge_reliability(r, bounds);
  constexpr std::array<const char*, 3> kModeNames{"still", "usual", "jolted"};
  for (std::size_t m = 0; m < 3; ++m)
    std::printf("mode %-8s stated %.4f, was %.4f (se %.4f)\n", kModeNames[m], tally.modes[m].expected(),
                tally.modes[m].observed(), tally.modes[m].standard_error());
}

}  // namespace
}  // namespace steelyard::judges

int main(int argc, char** argv) {
  using namespace steelyard::judges;
  const Numbers options(argc, argv,
                        {{"runs", 1000.0},
                         {"seed", 1.0},
                         {"length_s", 60.0},
                         {"forget", 1.0},
                         {"hypotheses", 60.0},
                         {"parents", 8.0},
                         {"known", 0.0}});
  auto model = prior_model();
  model->options.forget = options["forget"] != 0.0;
  model->options.max_hypotheses = options.whole("hypotheses");
  model->options.parents = options.whole("parents");
  std::printf("seed %d, %d runs of %g s, forgetting %s\n", options.whole("seed"), options.whole("runs"),
              options["length_s"], model->options.forget ? "on" : "off");
  Tally tally(model->channels.size());
  const int steps = static_cast<int>(options["length_s"] / kStepS);
  for (int i = 0; i < options.whole("runs"); ++i)
    run(model, static_cast<std::uint64_t>(options.whole("seed")) * 1'000'003U + static_cast<std::uint64_t>(i),
        steps, tally);
  Bounds bounds(options["known"] != 0.0);
  judge(*model, tally, bounds);
  return bounds.exit_code();
}
