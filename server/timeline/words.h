// SPDX-License-Identifier: Apache-2.0
// An estimate in words, for people: which channel is not to be believed, how, how sure, since when, and what
// else would explain the readings.
#pragma once

#include <functional>
#include <string>

#include "engine/estimate.h"
#include "rig/rig.h"
#include "timeline/kinds.h"
#include "timeline/numbers.h"

namespace steelyard::timeline {

/// Writes a time. Where it is empty, "for 42 s" stands instead of "since" and a time.
using TellTime = std::function<std::string(engine::TimeNs)>;

/// One channel in words. Sound: "meter is sound, 100 %, noise 0.012 m3/s (datasheet 0.004)". Else, and so
/// whenever its trust is under 0.5, with its rival and since when:
///   "sonic reads +0.182 m off (90 %: +0.172 to +0.192), 93 %, for 42 s; or else radar creeping by -0.17 m, 5
///   %" "cell is noisy, 0.040 m, 10 times the datasheet's (90 %: 0.032 to 0.049), 99 %, for 5 min; nothing
///   else
///    above 1 %"
/// `since_ns`: since when, where the engine does not say (of noise, Stretches::since does); 0: not known.
/// Intervals, levels and rivals need an estimate of Detail::kFull.
[[nodiscard]] std::string channel_words(const rig::Rig& rig, int channel, const engine::Estimate& estimate,
                                        engine::TimeNs since_ns = 0, const TellTime& time = {});

/// Since when the channel is what channel_words() calls it; `since_ns` as there; 0: sound, or not known.
[[nodiscard]] engine::TimeNs since_of(const engine::ChannelEstimate& channel,
                                      const engine::Estimate& estimate, engine::TimeNs since_ns = 0);

/// What explains a channel's readings if its leading kind does not.
struct Rival {
  std::string words;  ///< "radar offset by -0.17 m and meter frozen", "all channels sound"
  double probability = 0.0;
};
/// The heaviest explanation that has another condition for the channel; where the estimate lists none, the
/// channel's next condition.
[[nodiscard]] Rival rival_of(const rig::Rig& rig, int channel, const engine::Estimate& estimate);

/// "sonic offset by +0.182 m (90 %: +0.172 to +0.192) for 42 s; radar frozen for 12 s", "all channels are
/// sound". `now_ns`: the estimate's time.
[[nodiscard]] std::string explanation_words(const rig::Rig& rig, const engine::Explanation& explanation,
                                            engine::TimeNs now_ns, const TellTime& time = {});

}  // namespace steelyard::timeline
