// SPDX-License-Identifier: Apache-2.0
// Sentences. Display only: the most probable condition is named, nothing is decided by it.
#include "timeline/words.h"

#include <algorithm>
#include <cmath>
#include <cstddef>
#include <optional>
#include <vector>

namespace steelyard::timeline {
namespace {

using engine::ChannelEstimate;
using engine::Condition;
using engine::Finding;
using engine::TimeNs;

/// What a channel's words are made of.
struct Told {
  const engine::ChannelModel& model;
  const ChannelEstimate& estimate;
  int channel;
  int kind;
};

std::string part_name(const engine::ChannelModel& model, int part) {
  return model.name + "." + std::to_string(part + 1);
}

engine::PartEstimate part_of(const ChannelEstimate& channel, int part) {
  if (part > 0 && static_cast<std::size_t>(part) <= channel.others.size()) {
    return channel.others[static_cast<std::size_t>(part) - 1];
  }
  return {channel.noise_sd, channel.noise_sd90, channel.offset, channel.offset_sd};
}

/// Text for each part, by `tell`; those of a vector channel with their names.
template <typename Tell>
std::string each_part(const engine::ChannelModel& model, const Tell& tell) {
  if (model.parts() == 1) return tell(0);
  std::string out;
  for (int part = 0; part < model.parts(); ++part) {
    out += (part == 0 ? "" : ", ") + part_name(model, part) + " " + tell(part);
  }
  return out;
}

/// "+0.182 m off (90 %: +0.172 to +0.192)"
std::string offset_words(const Told& told) {
  return each_part(told.model, [&told](int part) {
    const engine::PartEstimate one = part_of(told.estimate, part);
    return with_unit(with_sign(one.offset, one.offset_sd), told.model.part(part).unit) + " off" +
           interval_words(one.offset, one.offset_sd, true);
  });
}

/// The datasheet's sd where the machine is now.
double datasheet_sd(const engine::PartModel& part, const engine::Estimate& estimate) {
  if (!part.sd_formula) return part.sd;
  std::vector<double> states;
  for (const engine::StateEstimate& state : estimate.states) states.push_back(state.mean);
  return part.sd_formula->evaluate(states, estimate.inputs, static_cast<double>(estimate.time_ns) * 1e-9);
}

/// "0.040 m, 10 times the datasheet's (90 %: 0.032 to 0.049)"
std::string noise_size_words(const Told& told, const engine::Estimate& estimate) {
  return each_part(told.model, [&](int part) {
    const engine::PartEstimate one = part_of(told.estimate, part);
    const engine::PartModel& model = told.model.part(part);
    std::string out = with_unit(two_digits(one.noise_sd), model.unit) + ", " +
                      two_digits(one.noise_sd / datasheet_sd(model, estimate)) + " times the datasheet's";
    if (one.noise_sd90.hi > 0.0) {
      out += " (90 %: " + two_digits(one.noise_sd90.lo) + " to " + two_digits(one.noise_sd90.hi) + ")";
    }
    return out;
  });
}

/// ", noise 0.012 m3/s (datasheet 0.004)" where that is worth telling of a sound channel.
std::string noise_words(const Told& told, const engine::Estimate& estimate) {
  constexpr double kWorthTelling = 1.25;  // about as much as twenty readings can tell apart
  std::string out;
  for (int part = 0; part < told.model.parts(); ++part) {
    const engine::PartModel& model = told.model.part(part);
    const double noise_sd = part_of(told.estimate, part).noise_sd;
    const double datasheet = datasheet_sd(model, estimate);
    if (!(noise_sd > kWorthTelling * datasheet)) continue;
    out += ", noise " + (told.model.parts() > 1 ? "of " + part_name(told.model, part) + " " : "") +
           with_unit(two_digits(noise_sd), model.unit) + " (datasheet " + two_digits(datasheet) + ")";
  }
  return out;
}

/// "at 2.130 m (90 %: 2.127 to 2.133)" by the heaviest explanation that has the channel stuck, or empty.
std::string level_words(const Told& told, const engine::Estimate& estimate) {
  for (const engine::Explanation& explanation : estimate.explanations) {
    std::string out;
    for (const Finding& finding : explanation.findings) {
      if (finding.channel != told.channel || finding.condition != Condition::kStuck) continue;
      out += (out.empty() ? " at " : " and ") +
             with_unit(rounded(finding.offset, finding.offset_sd), told.model.part(finding.part).unit) +
             interval_words(finding.offset, finding.offset_sd, false);
    }
    if (!out.empty()) return out;
  }
  return "";
}

std::string kind_words(const Told& told, const engine::Estimate& estimate) {
  const std::string& name = told.model.name;
  if (told.kind == kNoisyKind) return name + " is noisy, " + noise_size_words(told, estimate);
  if (told.kind == kSilentKind) return name + " is silent";
  switch (static_cast<Condition>(told.kind)) {
    case Condition::kSound:
      break;
    case Condition::kCreeping:
      return name + " creeps, " + offset_words(told);
    case Condition::kOffset:
      return name + " reads " + offset_words(told);
    case Condition::kWandering:
      return name + " wanders, " + offset_words(told);
    case Condition::kStuck:
      return name + " is stuck" + level_words(told, estimate);
    case Condition::kFrozen:
      return name + " repeats its last value";
  }
  return name + " is sound";
}

/// `lead` "for 42 s" or `lead` "since 12:00", or empty where it is not known.
std::string since_words(const char* lead, TimeNs since_ns, TimeNs now_ns, const TellTime& time) {
  if (since_ns == 0) return "";
  if (time) return lead + ("since " + time(since_ns));
  TimeNs age_ns = 0;
  if (__builtin_sub_overflow(now_ns, since_ns, &age_ns)) return "";
  return lead + ("for " + age_words(std::max(0.0, static_cast<double>(age_ns) * 1e-9)));
}

std::string rival_words(const Rival& rival) {
  if (!(rival.probability >= 0.01)) return "; nothing else above 1 %";
  return "; or else " + rival.words + ", " + percent(rival.probability);
}

/// "sonic offset by +0.18 m": one channel's part in an explanation, all its findings being `findings`.
std::string finding_words(const rig::Rig& rig, const std::vector<Finding>& findings, bool intervals) {
  const Finding& first = findings.front();
  const engine::ChannelModel& model = rig.model->channels[static_cast<std::size_t>(first.channel)];
  const std::string out = model.name + " " + condition_name(first.condition);
  const bool stuck = first.condition == Condition::kStuck;
  if (!stuck && !kind_has_offset(static_cast<int>(first.condition))) return out;
  std::string sizes;
  for (const Finding& one : findings) {
    const std::string number =
        stuck ? rounded(one.offset, one.offset_sd) : with_sign(one.offset, one.offset_sd);
    sizes += (sizes.empty() ? "" : " / ") + with_unit(number, model.part(one.part).unit);
    if (intervals) sizes += interval_words(one.offset, one.offset_sd, !stuck);
  }
  return out + (stuck ? " at " : " by ") + sizes;
}

/// The findings of one explanation, channel by channel.
std::vector<std::vector<Finding>> by_channel(const engine::Explanation& explanation) {
  std::vector<std::vector<Finding>> out;
  for (const Finding& finding : explanation.findings) {
    if (out.empty() || out.back().front().channel != finding.channel) out.emplace_back();
    out.back().push_back(finding);
  }
  return out;
}

Condition condition_in(const engine::Explanation& explanation, int channel) {
  for (const Finding& finding : explanation.findings) {
    if (finding.channel == channel) return finding.condition;
  }
  return Condition::kSound;
}

}  // namespace

Rival rival_of(const rig::Rig& rig, int channel, const engine::Estimate& estimate) {
  const ChannelEstimate& told = estimate.channels[static_cast<std::size_t>(channel)];
  const std::string& name = rig.model->channels[static_cast<std::size_t>(channel)].name;
  const int kind = leading_kind(told);
  if (kind == kSilentKind) return {name + " only late", 1.0 - told.silent};
  const auto main = static_cast<std::size_t>(kind == kNoisyKind ? kSoundKind : kind);
  for (const engine::Explanation& explanation : estimate.explanations) {
    if (condition_in(explanation, channel) == static_cast<Condition>(main)) continue;
    Rival rival{"", explanation.probability};
    for (const auto& findings : by_channel(explanation)) {
      rival.words += (rival.words.empty() ? "" : " and ") + finding_words(rig, findings, false);
    }
    if (rival.words.empty()) rival.words = "all channels sound";
    return rival;
  }
  std::size_t next = main == 0 ? 1 : 0;
  for (std::size_t i = 0; i < engine::kConditions; ++i) {
    if (i != main && told.probability[i] > told.probability[next]) next = i;
  }
  return {name + " " + condition_name(static_cast<Condition>(next)), told.probability[next]};
}

TimeNs since_of(const ChannelEstimate& channel, const engine::Estimate& estimate, TimeNs since_ns) {
  const int kind = leading_kind(channel);
  if (kind == kSoundKind) return 0;
  if (kind == kNoisyKind) return since_ns;
  if (kind != kSilentKind) return channel.unsound_since_ns != 0 ? channel.unsound_since_ns : since_ns;
  if (!(channel.age_s >= 0.0 && channel.age_s < 4e9)) return since_ns;
  const auto age_ns = static_cast<TimeNs>(std::llround(channel.age_s * 1e9));
  TimeNs last_ns = 0;
  return __builtin_sub_overflow(estimate.time_ns, age_ns, &last_ns) ? since_ns : last_ns;
}

std::string channel_words(const rig::Rig& rig, int channel, const engine::Estimate& estimate, TimeNs since_ns,
                          const TellTime& time) {
  const auto index = static_cast<std::size_t>(channel);
  const ChannelEstimate& one = estimate.channels[index];
  const Told told{rig.model->channels[index], one, channel, leading_kind(one)};
  if (one.age_s < 0.0 && told.kind != kSilentKind) return told.model.name + " has given no reading yet";
  std::string out = kind_words(told, estimate) + ", " + percent(kind_probability(one, told.kind));
  if (told.kind == kSoundKind) return out + noise_words(told, estimate);
  out += since_words(", ", since_of(one, estimate, since_ns), estimate.time_ns, time);
  return out + rival_words(rival_of(rig, channel, estimate));
}

std::string explanation_words(const rig::Rig& rig, const engine::Explanation& explanation, TimeNs now_ns,
                              const TellTime& time) {
  if (explanation.findings.empty()) return "all channels are sound";
  std::string words;
  for (const auto& findings : by_channel(explanation)) {
    words += (words.empty() ? "" : "; ") + finding_words(rig, findings, true) +
             since_words(" ", findings.front().since_ns, now_ns, time);
  }
  return words;
}

}  // namespace steelyard::timeline
