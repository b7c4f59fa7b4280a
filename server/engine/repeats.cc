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

double effective_resolution(const ChannelModel& channel) {
  return channel.resolution > 0.0 ? channel.resolution : channel.sd / 100.0;
}

RepeatRate::RepeatRate(const ChannelModel& channel, double response_s)
    : memory_s_(kMemoryResponses * response_s) {
  // Two readings of one value with noise sd fall into the same bin with density 1/(sd·√(4π)).
  const double by_chance = effective_resolution(channel) / (channel.sd * std::sqrt(4.0 * std::numbers::pi));
  const double rate = std::min(0.9, by_chance);
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

double repeat_factor(bool repeated, double learned_rate, double explained_rate) {
  constexpr double kTiny = 1e-12;
  if (repeated) return std::max(1.0, learned_rate / std::max(explained_rate, kTiny));
  return std::min(1.0, (1.0 - learned_rate) / std::max(1.0 - explained_rate, kTiny));
}

}  // namespace steelyard::engine
