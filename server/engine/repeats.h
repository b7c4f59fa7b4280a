// SPDX-License-Identifier: Apache-2.0
// How often a sound channel repeats its last value exactly, learned: a coarse digital sensor repeats often
// and is not frozen.
#pragma once

#include <array>

#include "engine/model.h"

namespace steelyard::engine {

/// A frozen channel's next reading: the last value with this probability, else anything over the range.
inline constexpr double kFrozenRepeats = 0.98;

/// Step of the channel's values, for the probability of an exact repeat.
[[nodiscard]] double effective_resolution(const ChannelModel& channel);

/// A Beta posterior with long memory for each of two cases, because repeats come in runs: slow quantities and
/// damped sensors repeat more often after a repeat than after a change.
class RepeatRate {
 public:
  RepeatRate() = default;
  RepeatRate(const ChannelModel& channel, double response_s);

  /// P(the next reading repeats), given what the last one did.
  [[nodiscard]] double mean() const;
  /// weight: probability that the reading came from a channel that is not frozen, so a freeze teaches
  /// nothing.
  void learn(bool repeated, double weight, double gap_s);

 private:
  struct Beta {
    double repeats = 1.0;
    double others = 1.0;
  };
  Beta prior_;
  std::array<Beta, 2> after_;  ///< after a change, after a repeat
  bool last_repeated_ = false;
  double memory_s_ = 1.0;
};

/// Factor on the likelihood of every standing hypothesis in which the channel is not frozen: on a repeat the
/// learned rate over what the noise explains (at least 1), else the complements' ratio (at most 1).
[[nodiscard]] double repeat_factor(bool repeated, double learned_rate, double explained_rate);

}  // namespace steelyard::engine
