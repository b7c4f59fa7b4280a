// SPDX-License-Identifier: Apache-2.0
// What the engine says about a moment: the fused state and how far each channel can be trusted.
#pragma once

#include <array>
#include <vector>

#include "engine/model.h"

namespace steelyard::engine {

struct Interval {
  double lo = 0.0;
  double hi = 0.0;
};

struct StateEstimate {
  double mean = 0.0;
  double sd = 0.0;
  Interval interval90;  ///< 5 % to 95 % of the whole mixture (Detail::kFull)
  bool two_peaked =
      false;  ///< the posterior has two separate peaks: the mean may lie where it never is (kFull)
  double within_needs = 1.0;  ///< P(|error of the mean| ≤ needs); 1 where the rig states no need (kFull)
};

/// What is learned of one part of a vector channel beyond the first.
struct PartEstimate {
  double noise_sd = 0.0;
  Interval noise_sd90;
  double offset = 0.0;
  double offset_sd = 0.0;
};

struct ChannelEstimate {
  double trust = 1.0;                             ///< in [0, 1]
  std::array<double, kConditions> probability{};  ///< by Condition; sums to 1
  double silent = 0.0;    ///< P(the channel has gone quiet), beside the conditions; 0 without a period
  double noise_sd = 0.0;  ///< learned repeatability, channel's unit
  Interval noise_sd90;    ///< 90 % interval of it (Detail::kFull)
  double offset = 0.0;    ///< given that it has one (creeping, offset, wandering); 0 where that has no weight
  double offset_sd = 0.0;
  std::vector<PartEstimate> others;  ///< of a vector channel's further parts; the numbers above: its first
  /// Mean time at which the present spell of unsoundness began, given that there is one; 0: it has no weight.
  TimeNs unsound_since_ns = 0;
  double influence =
      0.0;              ///< share of the present estimate that rests on this channel; sums to 1 or is all 0
  double age_s = -1.0;  ///< since its last usable reading; −1: none yet
  std::int64_t out_of_range = 0;  ///< readings so far that were not fused because they lay outside the range
};

/// One channel's part in a hypothesis that has it unsound (a vector channel: one finding for each part).
struct Finding {
  int channel = 0;
  Condition condition = Condition::kSound;
  double offset = 0.0;  ///< size for the walks, level for stuck and frozen
  double offset_sd = 0.0;
  int part = 0;
  TimeNs since_ns = 0;  ///< when the channel stopped being sound, posterior mean
};

/// One hypothesis, marginal over machine modes: which channels are unsound; none listed means all are sound.
struct Explanation {
  double probability = 0.0;
  std::vector<Finding> findings;
};

struct Estimate {
  TimeNs time_ns = 0;
  std::vector<StateEstimate> states;
  std::vector<double> inputs;  ///< believed values
  std::vector<double> inputs_sd;
  std::vector<ChannelEstimate> channels;
  std::array<double, kModes> mode{};      ///< by Mode; sums to 1
  std::vector<Explanation> explanations;  ///< heaviest first, at most three (Detail::kFull)
  int hypotheses = 0;                     ///< alive
};

}  // namespace steelyard::engine
