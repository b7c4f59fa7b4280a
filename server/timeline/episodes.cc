// SPDX-License-Identifier: Apache-2.0
#include "timeline/episodes.h"

#include <algorithm>
#include <utility>

namespace steelyard::timeline {
namespace {

using engine::TimeNs;

bool in_one_group(const engine::Model& model, int a, int b) {
  return std::any_of(model.common.begin(), model.common.end(), [&](const engine::CommonCause& cause) {
    const auto has = [&](int channel) {
      return std::find(cause.channels.begin(), cause.channels.end(), channel) != cause.channels.end();
    };
    return has(a) && has(b);
  });
}

bool froze_together(const Stretch& a, const Stretch& b, std::span<const int> sources) {
  constexpr auto kFrozen = static_cast<int>(engine::Condition::kFrozen);
  if (a.kind != kFrozen || b.kind != kFrozen) return false;
  const auto source = [&](const Stretch& one) {
    const auto index = static_cast<std::size_t>(one.channel);
    return index < sources.size() ? sources[index] : -1;
  };
  return source(a) >= 0 && source(a) == source(b);
}

}  // namespace

std::vector<Episode> episodes_of(std::vector<Stretch> stretches, const engine::Model& model,
                                 std::span<const int> sources, TimeNs within_ns) {
  std::vector<Episode> out;
  for (Stretch& stretch : stretches) {
    const std::size_t id = out.size() + 1;
    out.push_back({id, id, std::move(stretch)});
    Episode& newest = out.back();
    for (std::size_t i = out.size() - 1; i-- > 0;) {
      const Stretch& before = out[i].stretch;
      TimeNs apart_ns = 0;
      if (__builtin_sub_overflow(newest.stretch.from_ns, before.from_ns, &apart_ns)) break;
      if (apart_ns > within_ns) break;
      if (before.channel == newest.stretch.channel) continue;
      const bool one_cause = in_one_group(model, before.channel, newest.stretch.channel) ||
                             froze_together(before, newest.stretch, sources);
      if (one_cause) newest.cause = std::min(newest.cause, out[i].cause);
    }
  }
  return out;
}

}  // namespace steelyard::timeline
