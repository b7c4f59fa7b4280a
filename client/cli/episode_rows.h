// SPDX-License-Identifier: Apache-2.0
// The rows of replay's --episodes: what was not sound, when, how, and what else could have been.
#pragma once

#include <string>
#include <vector>

#include "cli/columns.h"
#include "timeline/episodes.h"

namespace steelyard::client {

/// id,channel,from,to,kind,size,size.lo,size.hi,probability,rival,rival.probability,cause
void append_episode_header(std::string& out);

/// One row; of a vector channel one for each part that has a size, named <channel>.1 and so on. What still
/// lasts has an empty `to`. size: of creeping, offset and wandering the offset, of noisy the noise's sd, of
/// stuck the level, with 90 % intervals; empty where there is none. Probabilities are those of the time at
/// which that size was seen: of the kind (of noisy: that the channel is sound else), and of the rival
/// explanation. `parts` of the channel.
void append_episode_rows(std::string& out, const Names& names, int parts, const timeline::Episode& episode,
                         TimeStyle style);

}  // namespace steelyard::client
