// SPDX-License-Identifier: Apache-2.0
// How often a sound channel repeats its last value exactly, learned: a coarse digital sensor repeats often
// and is not frozen.
#pragma once

#include "engine/model.h"

namespace steelyard::engine {

/// Step of the channel's values, for the probability of an exact repeat.
[[nodiscard]] double effective_resolution(const ChannelModel& channel);

/// A Beta posterior with long memory.
class RepeatRate {
 public:
  RepeatRate() = default;
  RepeatRate(const ChannelModel& channel, double response_s);

  [[nodiscard]] double mean() const { return repeats_ / (repeats_ + others_); }
  /// weight: probability that the reading came from a channel that is not frozen, so a freeze teaches
  /// nothing.
  void learn(bool repeated, double weight, double gap_s);

 private:
  double prior_repeats_ = 1.0;
  double prior_others_ = 1.0;
  double repeats_ = 1.0;
  double others_ = 1.0;
  double memory_s_ = 1.0;
};

/// Factor on the likelihood of every standing hypothesis in which the channel is not frozen: on a repeat the
/// learned rate over what the noise explains (at least 1), else the complements' ratio (at most 1).
[[nodiscard]] double repeat_factor(bool repeated, double learned_rate, double explained_rate);

}  // namespace steelyard::engine
