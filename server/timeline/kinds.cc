// SPDX-License-Identifier: Apache-2.0
#include "timeline/kinds.h"

#include <algorithm>

namespace steelyard::timeline {

using engine::ChannelEstimate;
using engine::Condition;

const char* condition_name(Condition condition) {
  switch (condition) {
    case Condition::kSound:
      return "sound";
    case Condition::kCreeping:
      return "creeping";
    case Condition::kOffset:
      return "offset";
    case Condition::kWandering:
      return "wandering";
    case Condition::kStuck:
      return "stuck";
    case Condition::kFrozen:
      return "frozen";
  }
  return "unknown";
}

const char* kind_name(int kind) {
  if (kind == kSilentKind) return "silent";
  return kind == kNoisyKind ? "noisy" : condition_name(static_cast<Condition>(kind));
}

bool kind_has_offset(int kind) {
  const auto condition = static_cast<Condition>(kind);
  return condition == Condition::kCreeping || condition == Condition::kOffset ||
         condition == Condition::kWandering;
}

Condition leading_condition(const ChannelEstimate& channel) {
  const auto leading = std::max_element(channel.probability.begin(), channel.probability.end());
  return static_cast<Condition>(leading - channel.probability.begin());
}

int leading_kind(const ChannelEstimate& channel) {
  if (channel.silent > 0.5) return kSilentKind;
  const auto& p = channel.probability;
  const double sound = p[kSoundKind];
  if (sound >= 0.5 && channel.trust >= 0.5) return kSoundKind;
  // Trust is P(sound) times the mean relative precision: which of the two takes more of it?
  if (sound - channel.trust > 1.0 - sound) return kNoisyKind;
  return static_cast<int>(std::max_element(p.begin() + 1, p.end()) - p.begin());
}

double kind_probability(const ChannelEstimate& channel, int kind) {
  if (kind == kSilentKind) return channel.silent;
  return channel.probability[static_cast<std::size_t>(kind == kNoisyKind ? kSoundKind : kind)];
}

const char* ne107_status(const ChannelEstimate& channel) {
  if (channel.silent > 0.5) return "failure";
  switch (leading_condition(channel)) {
    case Condition::kSound:
      return leading_kind(channel) == kNoisyKind ? "maintenance required" : "good";
    case Condition::kCreeping:
      return "maintenance required";
    case Condition::kOffset:
    case Condition::kWandering:
      return "out of specification";
    case Condition::kStuck:
    case Condition::kFrozen:
      return "failure";
  }
  return "check function";  // by marks alone; no condition means it
}

}  // namespace steelyard::timeline
