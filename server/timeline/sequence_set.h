// SPDX-License-Identifier: Apache-2.0
// Which sequence numbers of a source were taken, so that each is taken once.
#pragma once

#include <cstddef>
#include <cstdint>
#include <map>

namespace steelyard::timeline {

/// A set of numbers as runs. Bounded: at kMostRuns the lowest gap is closed, i.e. the numbers in it count as
/// taken from then on (a source that leaves so many gaps behind does not come back to the oldest).
class SequenceSet {
 public:
  static constexpr std::size_t kMostRuns = 4096;

  /// False if it was in already.
  bool insert(std::uint64_t sequence);
  [[nodiscard]] std::uint64_t highest() const { return runs_.empty() ? 0 : runs_.rbegin()->second; }
  [[nodiscard]] std::size_t runs() const { return runs_.size(); }

 private:
  std::map<std::uint64_t, std::uint64_t> runs_;  ///< first → last, not touching each other
};

}  // namespace steelyard::timeline
