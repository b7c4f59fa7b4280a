// SPDX-License-Identifier: Apache-2.0
// Following the leading condition of each channel, with short returns to sound joined.
#include "lib/log/stretches.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <utility>

#include "timeline/words.h"

namespace steelyard::client {
namespace {

using engine::TimeNs;

/// to − from ≥ 0 without wrapping.
TimeNs gap(TimeNs from, TimeNs to) {
  TimeNs result = 0;
  return __builtin_sub_overflow(to, from, &result) ? std::numeric_limits<TimeNs>::max() : result;
}

bool kind_has_size(int kind) {
  const auto condition = static_cast<engine::Condition>(kind);
  return condition == engine::Condition::kCreeping || condition == engine::Condition::kOffset ||
         condition == engine::Condition::kWandering;
}

/// How long a change must last before it is told, in fifths of `join`: a person is to hear early that a
/// channel is no longer sound, but not of every flicker. Between the kinds that differ in the speed of an
/// offset alone the lead wavers while the evidence gathers: that is no news.
TimeNs patience_fifths(int from, int to) {
  if (from == kSoundKind) return 1;
  return kind_has_size(from) && kind_has_size(to) ? 25 : 5;
}

double kind_probability(const ChannelView& view, int kind) {
  return kind == kSilentKind ? view.silent : view.probability[static_cast<std::size_t>(kind)];
}

std::string percent(double probability) {
  return std::to_string(std::lround(std::clamp(probability, 0.0, 1.0) * 100.0)) + " %";
}

/// "sonic: from 3 to 7, offset, up to +0.300 ± 0.010 m, 90 % at its surest (not sound: 98 %)"
std::string stretch_line(const Stretch& one, const std::string& name, const std::string& unit,
                         const std::function<std::string(TimeNs)>& time) {
  std::string out = name + ": from " + time(one.from_ns) + " to " + time(one.to_ns) +
                    (one.open ? " (and still)" : "") + ", " + kind_name(one.kind);
  if (one.has_size) {
    const std::string size = timeline::rounded(one.size, one.size_sd);
    out += std::string(", up to ") + (size.starts_with('-') ? "" : "+") + size + " ± " +
           timeline::rounded(one.size_sd, one.size_sd) + (unit.empty() || unit == "1" ? "" : " " + unit);
  }
  return out + ", " + percent(one.probability) + " at its surest (not sound: " + percent(one.unsound) + ")";
}

}  // namespace

const char* kind_name(int kind) {
  return kind == kSilentKind ? "silent" : timeline::condition_name(static_cast<engine::Condition>(kind));
}

ChannelView view_of(const engine::ChannelEstimate& channel) {
  return {channel.probability, channel.silent, channel.offset, channel.offset_sd};
}

int leading_kind(const ChannelView& view) {
  if (view.silent > 0.5) return kSilentKind;
  const auto leading = std::max_element(view.probability.begin(), view.probability.end());
  return static_cast<int>(leading - view.probability.begin());
}

Stretches::Stretches(std::size_t channels, TimeNs join_ns) : channels_(channels), join_ns_(join_ns) {}

void Stretches::add(TimeNs time_ns, std::span<const ChannelView> channels, const Words& words,
                    const OnChange& on_change) {
  if (last_ns_ && time_ns < *last_ns_) return;
  const std::size_t count = std::min(channels.size(), channels_.size());
  for (std::size_t i = 0; i < count; ++i) {
    const int channel = static_cast<int>(i);
    tell(time_ns, channel, leading_kind(channels[i]), words, on_change);
    follow(time_ns, channel, channels[i]);
  }
  last_ns_ = time_ns;
}

void Stretches::tell(TimeNs time_ns, int channel, int kind, const Words& words, const OnChange& on_change) {
  Channel& one = channels_[static_cast<std::size_t>(channel)];
  if (kind == one.told) {
    one.waiting = kind;
    return;
  }
  if (kind != one.waiting) {
    one.waiting = kind;
    one.waiting_since_ns = time_ns;
  }
  if (gap(one.waiting_since_ns, time_ns) / patience_fifths(one.told, kind) < join_ns_ / 5) return;
  one.told = kind;
  if (on_change) on_change({one.waiting_since_ns, channel, kind, words ? words(channel) : std::string()});
}

void Stretches::follow(TimeNs time_ns, int channel, const ChannelView& view) {
  Channel& one = channels_[static_cast<std::size_t>(channel)];
  const int kind = leading_kind(view);
  if (kind == kSoundKind) {
    if (one.in_stretch && !one.sound_since) {
      one.sound_since = true;
      one.to_ns = time_ns;
    }
    if (one.in_stretch && gap(one.to_ns, time_ns) >= join_ns_) close(channel, false);
    return;
  }
  if (one.in_stretch && one.sound_since && gap(one.to_ns, time_ns) >= join_ns_) close(channel, false);
  if (!one.in_stretch) {
    one.in_stretch = true;
    one.from_ns = time_ns;
  }
  const bool first = one.from_ns == time_ns || one.sound_since || !last_ns_;
  one.sound_since = false;
  one.to_ns = time_ns;
  see(one, kind, view, first ? 0.0 : static_cast<double>(gap(*last_ns_, time_ns)) * 1e-9);
}

void Stretches::see(Channel& one, int kind, const ChannelView& view, double step_s) {
  // Among times at which the kind is nearly as probable as ever the largest offset is told: a slow creep is
  // named by where it came to, not by where it was first certain.
  constexpr double kNearly = 0.9;
  constexpr double kMoment_s = 1e-9;  // so that a stretch of a single estimate has a kind
  const double probability = kind_probability(view, kind);
  KindSeen& seen = one.kinds[static_cast<std::size_t>(kind)];
  seen.weight_s += probability * (step_s + kMoment_s);
  const bool surer = probability * kNearly > seen.probability;
  const bool larger =
      probability >= seen.probability * kNearly && std::abs(view.offset) > std::abs(seen.size);
  if (surer || larger) {
    seen.size = view.offset;
    seen.size_sd = view.offset_sd;
  }
  seen.probability = std::max(seen.probability, probability);
  one.unsound = std::max({one.unsound, 1.0 - view.probability[kSoundKind], view.silent});
}

void Stretches::close(int channel, bool open) {
  Channel& one = channels_[static_cast<std::size_t>(channel)];
  const auto most =
      std::max_element(one.kinds.begin(), one.kinds.end(),
                       [](const KindSeen& a, const KindSeen& b) { return a.weight_s < b.weight_s; });
  const int kind = static_cast<int>(most - one.kinds.begin());
  const bool brief = !open && gap(one.from_ns, one.to_ns) < join_ns_ / 5;
  if (done_.size() < kMost) {
    done_.push_back({channel, one.from_ns, one.to_ns, open, brief, kind, most->probability, one.unsound,
                     kind_has_size(kind), most->size, most->size_sd});
  } else {
    ++left_out_;
  }
  one.in_stretch = false;
  one.sound_since = false;
  one.unsound = 0.0;
  one.kinds = {};
}

std::vector<Stretch> Stretches::finish() {
  for (std::size_t i = 0; i < channels_.size(); ++i) {
    if (channels_[i].in_stretch) close(static_cast<int>(i), !channels_[i].sound_since);
  }
  std::stable_sort(done_.begin(), done_.end(), [](const Stretch& a, const Stretch& b) {
    return a.from_ns != b.from_ns ? a.from_ns < b.from_ns : a.channel < b.channel;
  });
  return std::exchange(done_, {});
}

std::string stretches_text(const std::vector<Stretch>& stretches, std::uint64_t left_out,
                           std::span<const std::string> names, std::span<const std::string> units,
                           const std::function<std::string(TimeNs)>& time) {
  if (stretches.empty()) return "Every channel was sound throughout.\n";
  std::string out = "Stretches in which a channel was not sound:\n";
  std::vector<int> brief(names.size());
  for (const Stretch& one : stretches) {
    const auto index = static_cast<std::size_t>(one.channel);
    if (one.brief) {
      ++brief[index];
    } else {
      out += "  " + stretch_line(one, names[index], units[index], time) + "\n";
    }
  }
  for (std::size_t i = 0; i < names.size(); ++i) {
    if (brief[i] == 0) continue;
    out += "  " + names[i] + ": " + std::to_string(brief[i]) + (brief[i] == 1 ? " time" : " times") +
           " for less than a fifth of the response time\n";
  }
  if (left_out > 0) out += "  … and " + std::to_string(left_out) + " more\n";
  return out;
}

}  // namespace steelyard::client
