// SPDX-License-Identifier: Apache-2.0
// The learned repeat rate (engine.md §4 step 3).
#include "engine/repeats.h"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace steelyard::engine {
namespace {

constexpr double kPriorReadings = 20.0;
constexpr double kMemoryResponses = 100.0;

}  // namespace

double effective_resolution(const PartModel& part) {
  return part.resolution > 0.0 ? part.resolution : part.sd / 100.0;
}

RepeatRate::RepeatRate(const ChannelModel& channel, double response_s)
    : memory_s_(kMemoryResponses * response_s) {
  // Two readings of one value with noise sd fall into the same bin with density 1/(sd·√(4π)).
  double rate = 1.0;
  for (int i = 0; i < channel.parts(); ++i) {
    const PartModel& part = channel.part(i);
    rate *= std::min(0.9, effective_resolution(part) / (part.sd * std::sqrt(4.0 * std::numbers::pi)));
  }
  prior_ = {kPriorReadings * rate, kPriorReadings * (1.0 - rate)};
  after_.fill(prior_);
}

double RepeatRate::mean() const {
  const Beta& now = after_[last_repeated_ ? 1 : 0];
  return now.repeats / (now.repeats + now.others);
}

void RepeatRate::learn(bool repeated, double weight, double gap_s) {
  const double keep = std::exp2(-gap_s / memory_s_);
  for (Beta& b : after_) {
    b.repeats = prior_.repeats + keep * (b.repeats - prior_.repeats);
    b.others = prior_.others + keep * (b.others - prior_.others);
  }
  Beta& now = after_[last_repeated_ ? 1 : 0];
  (repeated ? now.repeats : now.others) += weight;
  last_repeated_ = repeated;
}

double LossRate::log_lost(double missed) const {
  const double first = lost_first_ / (lost_first_ + came_first_);
  const double next = lost_next_ / (lost_next_ + came_next_);
  return std::min(missed, 1.0) * std::log(first) + std::max(missed - 1.0, 0.0) * std::log(next);
}

void LossRate::learn(double missed, double weight, double gap_s) {
  const double keep = std::exp2(-gap_s / memory_s_);
  const auto fade = [keep](double& count, double prior) { count = prior + keep * (count - prior); };
  fade(lost_first_, kFirst * kPriorReadings);
  fade(came_first_, (1.0 - kFirst) * kPriorReadings);
  fade(lost_next_, kNext * kPriorReadings);
  fade(came_next_, (1.0 - kNext) * kPriorReadings);
  (missed > 0.0 ? lost_first_ : came_first_) += weight;
  if (!(missed > 0.0)) return;
  lost_next_ += weight * (missed - 1.0);
  came_next_ += weight;
}

double frozen_log_likelihood(bool repeated, double resolution, double span) {
  return repeated ? std::log(kFrozenRepeats / resolution) : std::log((1.0 - kFrozenRepeats) / span);
}

double repeat_factor(bool repeated, double learned_rate, double explained_rate) {
  constexpr double kTiny = 1e-12;
  if (repeated) return std::max(1.0, learned_rate / std::max(explained_rate, kTiny));
  return std::min(1.0, (1.0 - learned_rate) / std::max(1.0 - explained_rate, kTiny));
}

}  // namespace steelyard::engine
