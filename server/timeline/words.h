// SPDX-License-Identifier: Apache-2.0
// An estimate in words, for people: which channel is not to be believed, how, how sure.
#pragma once

#include <string>

#include "engine/estimate.h"
#include "rig/rig.h"

namespace steelyard::timeline {

/// The most probable condition of a channel.
[[nodiscard]] engine::Condition leading_condition(const engine::ChannelEstimate& channel);

/// "sound", "creeping", "offset", "wandering", "stuck", "frozen".
[[nodiscard]] const char* condition_name(engine::Condition condition);

/// One channel in words: "sonic reads +0.182 ± 0.006 m off, 93 %", "radar repeats its last value, 99 %",
/// "meter is sound, 100 %, noise 0.012 m3/s (datasheet 0.004)", "cell is silent for 42 s, 97 %".
[[nodiscard]] std::string channel_words(const rig::Rig& rig, int channel, const engine::Estimate& estimate);

/// NAMUR NE 107 status by the most probable condition (the five names, from memory): "good",
/// "maintenance required", "out of specification", "check function", "failure".
[[nodiscard]] const char* ne107_status(const engine::ChannelEstimate& channel);

/// A number with as many digits as its uncertainty deserves: (0.18234, 0.006) → "0.182".
[[nodiscard]] std::string rounded(double value, double sd);

}  // namespace steelyard::timeline
