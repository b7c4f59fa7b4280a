// SPDX-License-Identifier: Apache-2.0
// Showing and counting of refusals.
#include "cli/refusals.h"

#include <string>

namespace steelyard::client {

void Refusals::add(const rig::Problem& problem) {
  if (++count_ <= kShown) progress_.say(problem.text());
}

void Refusals::close() {
  if (count_ == 0) return;
  std::string line =
      "steelyard: " + std::to_string(count_) + (count_ == 1 ? " refusal" : " refusals") + " in the log";
  if (count_ > kShown) line += ", of which the first " + std::to_string(kShown) + " are shown";
  progress_.say(line + "; everything else was used");
}

}  // namespace steelyard::client
