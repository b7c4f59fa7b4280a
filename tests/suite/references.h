// SPDX-License-Identifier: Apache-2.0
// The filters that the engine is compared with. All use the machine's FilterModel, whose constant process
// noise fits the runs without faults best, and all but told and informed believe what the rig declares.
#pragma once

#include <array>
#include <vector>

#include "suite/faults.h"

namespace steelyard::suite {

enum class Reference {
  kTold,      ///< knows the fault and drops the channel meanwhile; knows the noise where that changes; skips
              ///< strays and held values
  kInformed,  ///< the information limit: knows kind, size law and time, and models them (informed.h)
  kFixed,     ///< knows nothing and believes everything
  kGated,     ///< skips what lies outside the 99 % gate of its own expectation
  kMedian,    ///< fuses the mid value of the channels that read the same quantity (the trade's vote)
  kVariational,  ///< learns each channel's noise (variational.h)
};
inline constexpr int kReferences = 6;
inline constexpr std::array<const char*, kReferences> kReferenceNames{"told",  "informed",  "fixed",
                                                                      "gated", "mid value", "variational"};

/// What a filter states after each step: means and sds of the judged states, in their order.
struct Track {
  std::vector<Vector> mean;
  std::vector<Vector> sd;
};

/// A run of a machine as all filters see it. Members must outlive it.
struct Run {
  const Machine& machine;
  const Row& row;  ///< resolved
  const Truth& truth;
  const Readings& readings;
  std::vector<Channel> channels;  ///< as they are
  std::vector<double> sd;         ///< as they are declared, by channel
  Vector unrest;                  ///< as it is declared
};

[[nodiscard]] Run make_run(const Machine& machine, const Row& row, const Truth& truth,
                           const Readings& readings);
[[nodiscard]] Track reference(const Run& run, Reference which);

/// Variance of a reading's rounding.
[[nodiscard]] inline double rounding(const Channel& c) { return c.resolution * c.resolution / 12.0; }
/// y − expected, modulo the channel's turn.
[[nodiscard]] double residual(const Channel& c, double y, double expected);

}  // namespace steelyard::suite
