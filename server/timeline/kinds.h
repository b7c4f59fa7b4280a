// SPDX-License-Identifier: Apache-2.0
// What may be wrong with a channel, as it is told: the engine's conditions and, behind them, silence and
// noise. Display only: the most probable one is named, nothing is decided by it.
#pragma once

#include "engine/estimate.h"

namespace steelyard::timeline {

inline constexpr int kKinds = engine::kConditions + 2;
inline constexpr int kSoundKind = 0;
inline constexpr int kSilentKind = engine::kConditions;
inline constexpr int kNoisyKind = engine::kConditions + 1;

/// "sound", "creeping", "offset", "wandering", "stuck", "frozen".
[[nodiscard]] const char* condition_name(engine::Condition condition);
/// The same and "silent", "noisy".
[[nodiscard]] const char* kind_name(int kind);

/// creeping, offset, wandering: those that have an offset.
[[nodiscard]] bool kind_has_offset(int kind);

/// The most probable condition of a channel.
[[nodiscard]] engine::Condition leading_condition(const engine::ChannelEstimate& channel);

/// Silence where that is more probable than not; sound where that and a trust of at least 0.5 hold; else what
/// takes most of the trust: noise, or the most probable unsound condition.
[[nodiscard]] int leading_kind(const engine::ChannelEstimate& channel);

/// P(kind); of noise P(sound), which it then is in all else.
[[nodiscard]] double kind_probability(const engine::ChannelEstimate& channel, int kind);

/// NAMUR NE 107 status by the most probable condition, or noise (the five names, from memory): "good",
/// "maintenance required" (creeping, noisy), "out of specification" (offset, wandering), "check function" (by
/// marks alone), "failure" (stuck, frozen, silent).
[[nodiscard]] const char* ne107_status(const engine::ChannelEstimate& channel);

}  // namespace steelyard::timeline
