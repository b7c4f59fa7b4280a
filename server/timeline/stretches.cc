// SPDX-License-Identifier: Apache-2.0
// Following the leading kind of each channel, with short returns to sound joined.
#include "timeline/stretches.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <utility>

namespace steelyard::timeline {
namespace {

using engine::ChannelEstimate;
using engine::TimeNs;

/// to − from ≥ 0 without wrapping.
TimeNs gap(TimeNs from, TimeNs to) {
  TimeNs result = 0;
  return __builtin_sub_overflow(to, from, &result) ? std::numeric_limits<TimeNs>::max() : result;
}

/// How long a change must last before it is told, in fifths of `join`: a person is to hear early that a
/// channel is no longer sound, but not of every flicker. Between the kinds that differ in the speed of an
/// offset alone the lead wavers while the evidence gathers: that is no news.
TimeNs patience_fifths(int from, int to) {
  if (from == kSoundKind) return 1;
  return kind_has_offset(from) && kind_has_offset(to) ? 25 : 5;
}

Size around(double mean, double sd) { return {mean, mean - kHalf90 * sd, mean + kHalf90 * sd}; }

/// Levels at which the heaviest explanation that has the channel stuck sees it, by part.
std::vector<Size> levels_of(const engine::Estimate& estimate, int channel) {
  std::vector<Size> out;
  for (const engine::Explanation& explanation : estimate.explanations) {
    for (const engine::Finding& finding : explanation.findings) {
      if (finding.channel != channel || finding.condition != engine::Condition::kStuck) continue;
      out.push_back(around(finding.offset, finding.offset_sd));
    }
    if (!out.empty()) break;
  }
  return out;
}

double extent_of(const ChannelEstimate& channel, int kind) {
  if (kind == kNoisyKind) return channel.noise_sd;
  if (!kind_has_offset(kind)) return 0.0;
  double extent = std::abs(channel.offset);
  for (const engine::PartEstimate& part : channel.others) extent = std::hypot(extent, part.offset);
  return extent;
}

std::string signed_if(bool sign, double value, double sd) {
  return sign ? with_sign(value, sd) : rounded(value, sd);
}

/// "+0.300 m (90 %: +0.284 to +0.316)"
std::string size_text(const Size& one, int kind, const std::string& unit) {
  const bool sign = kind_has_offset(kind);
  const double sd = (one.hi - one.lo) / (2.0 * kHalf90);
  std::string out = with_unit(signed_if(sign, one.size, sd), unit);
  if (!(sd > 0.0)) return out;
  return out + " (90 %: " + signed_if(sign, one.lo, sd) + " to " + signed_if(sign, one.hi, sd) + ")";
}

/// "sonic: from 3 to 7, offset, up to +0.300 m (90 %: +0.284 to +0.316), 90 % at its surest (not sound: 98
/// %)"
std::string stretch_line(const Stretch& one, const std::string& name, const std::string& unit,
                         const TellTime& time) {
  std::string out = name + ": from " + time(one.from_ns) + " to " + time(one.to_ns) +
                    (one.open ? " (and still)" : "") + ", " + kind_name(one.kind);
  for (std::size_t i = 0; i < one.sizes.size(); ++i) {
    const bool level = one.kind == static_cast<int>(engine::Condition::kStuck);
    out += (i > 0 ? " / " : level ? " at " : ", up to ") + size_text(one.sizes[i], one.kind, unit);
  }
  out += ", " + percent(one.probability) + " at its surest";
  if (one.kind != kNoisyKind) out += " (not sound: " + percent(one.unsound) + ")";
  return out;
}

}  // namespace

std::vector<Size> sizes_of(const engine::Estimate& estimate, int channel, int kind) {
  const ChannelEstimate& told = estimate.channels[static_cast<std::size_t>(channel)];
  if (kind == static_cast<int>(engine::Condition::kStuck)) return levels_of(estimate, channel);
  const bool noisy = kind == kNoisyKind;
  if (!noisy && !kind_has_offset(kind)) return {};
  std::vector<Size> out;
  const auto add = [&](double noise, const engine::Interval& in, double offset, double sd) {
    out.push_back(noisy ? Size{noise, in.lo, in.hi} : around(offset, sd));
  };
  add(told.noise_sd, told.noise_sd90, told.offset, told.offset_sd);
  for (const engine::PartEstimate& part : told.others) {
    add(part.noise_sd, part.noise_sd90, part.offset, part.offset_sd);
  }
  return out;
}

Stretches::Stretches(std::size_t channels, TimeNs join_ns, std::size_t most)
    : channels_(channels), join_ns_(join_ns), most_(most) {}

void Stretches::add(const engine::Estimate& estimate, const Calls& calls) {
  const TimeNs time_ns = estimate.time_ns;
  if (last_ns_ && time_ns < *last_ns_) return;
  if (!first_ns_) first_ns_ = time_ns;
  const std::size_t count = std::min(estimate.channels.size(), channels_.size());
  for (std::size_t i = 0; i < count; ++i) {
    const int channel = static_cast<int>(i);
    const int kind = leading_kind(estimate.channels[i]);
    follow(estimate, channel, kind, calls);
    tell(time_ns, channel, kind, calls);
  }
  last_ns_ = time_ns;
}

TimeNs Stretches::since(int channel) const {
  const Channel& one = channels_[static_cast<std::size_t>(channel)];
  return one.in_stretch && !one.sound_since ? one.from_ns : 0;
}

void Stretches::tell(TimeNs time_ns, int channel, int kind, const Calls& calls) {
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
  if (!calls.on_change) return;
  calls.on_change({one.waiting_since_ns, channel, kind, calls.words ? calls.words(channel) : std::string()});
}

void Stretches::follow(const engine::Estimate& estimate, int channel, int kind, const Calls& calls) {
  const TimeNs time_ns = estimate.time_ns;
  Channel& one = channels_[static_cast<std::size_t>(channel)];
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
  see(channel, kind, estimate, first ? 0.0 : static_cast<double>(gap(*last_ns_, time_ns)) * 1e-9, calls);
}

void Stretches::see(int channel, int kind, const engine::Estimate& estimate, double step_s,
                    const Calls& calls) {
  // Among times at which the kind is nearly as probable as ever the largest size is told: a slow creep is
  // named by where it came to, not by where it was first certain.
  constexpr double kNearly = 0.9;
  constexpr double kMoment_s = 1e-9;  // so that a stretch of a single estimate has a kind
  Channel& one = channels_[static_cast<std::size_t>(channel)];
  const ChannelEstimate& told = estimate.channels[static_cast<std::size_t>(channel)];
  const double probability = kind_probability(told, kind);
  const double extent = extent_of(told, kind);
  KindSeen& seen = one.kinds[static_cast<std::size_t>(kind)];
  seen.weight_s += probability * (step_s + kMoment_s);
  const bool surer = probability * kNearly > seen.probability;
  const bool larger = probability >= seen.probability * kNearly && extent > seen.extent;
  if (surer || larger) {
    seen.extent = extent;
    seen.then = probability;
    seen.since_ns = since_of(told, estimate);
    const bool needs_full = calls.full && !kind_has_offset(kind);
    seen.sizes = sizes_of(needs_full ? calls.full() : estimate, channel, kind);
    if (calls.rival) seen.rival = calls.rival(channel);
  }
  seen.probability = std::max(seen.probability, probability);
  one.unsound = std::max({one.unsound, 1.0 - told.probability[kSoundKind], told.silent});
}

void Stretches::close(int channel, bool open) {
  Channel& one = channels_[static_cast<std::size_t>(channel)];
  const auto most =
      std::max_element(one.kinds.begin(), one.kinds.end(),
                       [](const KindSeen& a, const KindSeen& b) { return a.weight_s < b.weight_s; });
  const int kind = static_cast<int>(most - one.kinds.begin());
  const bool brief = !open && gap(one.from_ns, one.to_ns) < join_ns_ / 5;
  // The engine's beginning lies before the moment at which it came to believe in it. Where it hardly did,
  // that beginning is one of many that it weighed, and says nothing.
  const bool believed = most->since_ns != 0 && most->then >= 0.5 && !brief;
  const TimeNs earliest = one.closed_ns.value_or(*first_ns_);
  const TimeNs since = believed ? std::max(most->since_ns, earliest) : one.from_ns;
  const TimeNs from = std::min(one.from_ns, since);
  if (done_.size() < most_) {
    done_.push_back({channel, from, one.to_ns, open, brief, kind, most->probability, one.unsound,
                     std::move(most->sizes), most->then, std::move(most->rival)});
  } else {
    ++left_out_;
  }
  one.in_stretch = false;
  one.sound_since = false;
  one.closed_ns = one.to_ns;
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
                           const TellTime& time) {
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

}  // namespace steelyard::timeline
