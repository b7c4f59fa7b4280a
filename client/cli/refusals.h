// SPDX-License-Identifier: Apache-2.0
// What of a log was refused: the first few are shown, all are counted.
#pragma once

#include <cstdint>

#include "cli/progress.h"
#include "rig/rig.h"

namespace steelyard::client {

class Refusals {
 public:
  static constexpr std::uint64_t kShown = 10;

  /// `progress` must outlive this.
  explicit Refusals(Progress& progress) : progress_(progress) {}

  void add(const rig::Problem& problem);
  /// Says how many there were, if any.
  void close();
  [[nodiscard]] std::uint64_t count() const { return count_; }

 private:
  Progress& progress_;
  std::uint64_t count_ = 0;
};

}  // namespace steelyard::client
