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
[[nodiscard]] double effective_resolution(const PartModel& part);

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

/// How often a reading is lost on the way though its channel is well, learned apart for the first that is
/// missing and for the next ones, because losses come in bursts. For channels with a declared period.
class LossRate {
 public:
  LossRate() = default;
  explicit LossRate(double response_s) : memory_s_(100.0 * response_s) {}

  /// log P(so many readings in a row are lost).
  [[nodiscard]] double log_lost(double missed) const;
  /// A reading came after `missed` lost ones; weight: probability that the channel was well meanwhile.
  void learn(double missed, double weight, double gap_s);

 private:
  static constexpr double kFirst = 0.1;
  static constexpr double kNext = 0.3;
  static constexpr double kPriorReadings = 20.0;
  double lost_first_ = kFirst * kPriorReadings;  ///< readings that were lost after one that came
  double came_first_ = (1.0 - kFirst) * kPriorReadings;
  double lost_next_ = kNext * kPriorReadings;  ///< that were lost after a lost one
  double came_next_ = (1.0 - kNext) * kPriorReadings;
  double memory_s_ = 1.0;
};

/// What a frozen channel says to a reading that is not censored by its range.
[[nodiscard]] double frozen_log_likelihood(bool repeated, double resolution, double span);

/// Factor on the likelihood of every standing hypothesis in which the channel is not frozen: on a repeat the
/// learned rate over what the noise explains (at least 1), else the complements' ratio (at most 1).
[[nodiscard]] double repeat_factor(bool repeated, double learned_rate, double explained_rate);

}  // namespace steelyard::engine
