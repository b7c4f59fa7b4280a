// SPDX-License-Identifier: Apache-2.0
// Which stretches have one cause, as far as the rig says what can: channels of a `common` group that turned
// unsound together, channels of one source that froze together. Display only.
#pragma once

#include <cstddef>
#include <span>
#include <vector>

#include "engine/model.h"
#include "timeline/stretches.h"

namespace steelyard::timeline {

/// A stretch with its place among all.
struct Episode {
  std::size_t id = 0;     ///< from 1, by the time of the beginning
  std::size_t cause = 0;  ///< id of the first episode with the same cause; its own if it is the first
  Stretch stretch;
};

/// `stretches` come by the time of their beginning. `sources`: by channel, who feeds it; negative: not known.
/// Beginnings at most `within_ns` apart count as together.
[[nodiscard]] std::vector<Episode> episodes_of(std::vector<Stretch> stretches, const engine::Model& model,
                                               std::span<const int> sources, engine::TimeNs within_ns);

}  // namespace steelyard::timeline
