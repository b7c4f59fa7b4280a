// SPDX-License-Identifier: Apache-2.0
#include "timeline/sequence_set.h"

#include <iterator>

namespace steelyard::timeline {

bool SequenceSet::insert(std::uint64_t sequence) {
  auto after = runs_.upper_bound(sequence);
  auto run = runs_.end();
  if (after != runs_.begin()) {
    run = std::prev(after);
    if (sequence <= run->second) return false;
    if (sequence != run->second + 1) run = runs_.end();
  }
  if (run != runs_.end()) {
    run->second = sequence;
  } else {
    run = runs_.emplace_hint(after, sequence, sequence);
  }
  if (after != runs_.end() && after->first == sequence + 1) {
    run->second = after->second;
    runs_.erase(after);
  }
  if (runs_.size() > kMostRuns) {
    const auto lowest = runs_.begin();
    const auto next = std::next(lowest);
    lowest->second = next->second;
    runs_.erase(next);
  }
  return true;
}

}  // namespace steelyard::timeline
