// SPDX-License-Identifier: Apache-2.0
// The engine's run of one seed.
#include <time.h>

#include <algorithm>
#include <cmath>

#include "engine/engine.h"
#include "suite/runner.h"

namespace steelyard::suite {
namespace {

constexpr engine::TimeNs kStart = 1'000'000'000;
constexpr std::size_t kMostParts = 2;  // of a channel

// Of this thread: other rows running beside it do not count.
double cpu_time_us() {
  timespec t{};
  clock_gettime(CLOCK_THREAD_CPUTIME_ID, &t);
  return 1e6 * static_cast<double>(t.tv_sec) + 1e-3 * static_cast<double>(t.tv_nsec);
}

class Watch {
 public:
  Watch(const Run& run, const Settings& settings)
      : run_(run), machine_(declare(run.machine, run.row, settings)), number_(numbers(run.machine, run.row)) {
    out_.wronged.assign(run.channels.size(), 0.0);
    noticed_s_.assign(run.row.faults.size(), -1.0);
  }

  Watched all() {
    const double begin_us = cpu_time_us();
    for (int i = 0; i < run_.machine.steps; ++i) step(i);
    out_.busy_us = cpu_time_us() - begin_us;
    out_.hypotheses /= run_.machine.steps;
    out_.mid_trust = mid_trust_;
    out_.seeds = 1.0;
    for (std::size_t k = 0; k < noticed_s_.size(); ++k) tell_notice(run_.row.faults[k], noticed_s_[k]);
    return out_;
  }

 private:
  void step(int i) {
    const double t_s = i * run_.machine.step_s;
    const engine::TimeNs t = kStart + i * std::llround(run_.machine.step_s * 1e9);
    feed(i, t);
    machine_.estimate(t, engine::Detail::kBrief, estimate_);
    out_.hypotheses += estimate_.hypotheses;
    note_errors(i);
    if (i >= run_.machine.first_judged()) note_wronged();
    for (std::size_t k = 0; k < noticed_s_.size(); ++k) note_fault(k, i, t_s);
  }

  void feed(int i, engine::TimeNs t) {
    const auto u = static_cast<std::size_t>(i);
    const Vector& input = run_.truth.input[u];
    for (int k = 0; k < input.size(); ++k) machine_.set_input(t, k, input[k], true);
    for (std::size_t j = 0; j < number_.size(); ++j) {
      const Channel& c = run_.channels[j];
      const int first = run_.machine.first_part(static_cast<int>(j));
      std::array<double, kMostParts> y{};
      for (int p = 0; p < c.parts; ++p)
        y[static_cast<std::size_t>(p)] = run_.readings.value[static_cast<std::size_t>(first + p)][u];
      if (number_[j] < 0 || std::isnan(y[0])) continue;
      const int source = run_.row.declared.sources ? static_cast<int>(c.source) : 0;
      machine_.read(t, number_[j], std::span<const double>(y.data(), static_cast<std::size_t>(c.parts)),
                    engine::Quality::kGood, source);
      out_.readings += 1.0;
    }
  }

  void note_errors(int i) {
    const auto count = static_cast<int>(run_.machine.judged.size());
    Vector mean(count);
    Vector sd(count);
    for (int k = 0; k < count; ++k) {
      const auto s = static_cast<std::size_t>(run_.machine.judged[static_cast<std::size_t>(k)].state);
      mean[k] = estimate_.states[s].mean;
      sd[k] = estimate_.states[s].sd;
    }
    out_.score.add(run_.machine, run_.truth, i, mean, sd);
  }

  [[nodiscard]] double trust(std::size_t j) const {
    return estimate_.channels[static_cast<std::size_t>(number_[j])].trust;
  }

  void note_wronged() {
    out_.steps += 1.0;
    for (std::size_t j = 0; j < number_.size(); ++j)
      if (number_[j] >= 0 && !run_.row.hurts(static_cast<int>(j)) &&
          !run_.row.misdeclares(static_cast<int>(j)))
        out_.wronged[j] += trust(j) < 0.5;
  }

  void note_fault(std::size_t k, int i, double t_s) {
    const Fault& f = run_.row.faults[k];
    const double now = trust(static_cast<std::size_t>(f.channel));
    if (i == static_cast<int>(0.5 * (f.from_s + f.to_s) / run_.machine.step_s))
      mid_trust_ = std::max(mid_trust_, now);
    if (noticed_s_[k] < 0.0 && t_s >= f.from_s && t_s < f.to_s && now < 0.5) noticed_s_[k] = t_s - f.from_s;
  }

  void tell_notice(const Fault& f, double after_s) {
    if (after_s < 0.0) out_.unnoticed = 1.0;
    out_.notice_s = std::max(out_.notice_s, after_s < 0.0 ? f.to_s - f.from_s : after_s);
  }

  const Run& run_;
  engine::Engine machine_;
  std::vector<int> number_;  // in the engine, by channel
  engine::Estimate estimate_;
  Watched out_;
  double mid_trust_ = 0.0;
  std::vector<double> noticed_s_;  // after its beginning, by fault; −1: not yet
};

}  // namespace

Watched watch(const Run& run, const Settings& settings) { return Watch(run, settings).all(); }

}  // namespace steelyard::suite
