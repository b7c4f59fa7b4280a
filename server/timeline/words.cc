// SPDX-License-Identifier: Apache-2.0
// Estimates in words. Display only: the most probable condition is named, nothing is decided by it.
#include "timeline/words.h"

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>
#include <cstddef>
#include <optional>
#include <system_error>
#include <vector>

namespace steelyard::timeline {
namespace {

using engine::ChannelEstimate;
using engine::Condition;

constexpr std::size_t kLongestNumber = 512;  // digits of the largest double in fixed form, and some

std::string fixed(double value, int decimals) {
  std::array<char, kLongestNumber> buffer;
  const auto [end, error] = std::to_chars(buffer.data(), buffer.data() + buffer.size(), value,
                                          std::chars_format::fixed, std::max(decimals, 0));
  return error == std::errc() ? std::string(buffer.data(), end) : "?";
}

std::string general(double value, int digits) {
  std::array<char, 64> buffer;
  const auto [end, error] =
      std::to_chars(buffer.data(), buffer.data() + buffer.size(), value, std::chars_format::general, digits);
  return error == std::errc() ? std::string(buffer.data(), end) : "?";
}

/// Power of ten of the last digit worth writing: the sd's first one, or its second where the first is 1 (an
/// sd of 0.1 may be 0.14, which is too coarse a step).
int last_digit_power(double sd) {
  const int power = static_cast<int>(std::floor(std::log10(sd)));
  const double leading = sd / std::pow(10.0, power);
  return leading < 1.95 ? power - 1 : power;
}

/// Two significant digits, for a standard deviation that stands alone.
std::string two_digits(double value) {
  if (!std::isfinite(value) || value == 0.0) return general(value, 2);
  const double magnitude = std::abs(value);
  if (magnitude < 1e-4 || magnitude >= 1e6) return general(value, 2);
  const int power = static_cast<int>(std::floor(std::log10(magnitude))) - 1;
  std::string text = power < 0 ? fixed(value, -power) : fixed(value, 0);
  if (power < 0) {
    text.erase(text.find_last_not_of('0') + 1);
    if (text.ends_with('.')) text.pop_back();
  }
  return text;
}

/// "1" is the unit of what has none.
std::string with_unit(const std::string& number, const std::string& unit) {
  return unit.empty() || unit == "1" ? number : number + " " + unit;
}

std::string percent(double probability) {
  return fixed(std::round(std::clamp(probability, 0.0, 1.0) * 100.0), 0) + " %";
}

/// "+0.182 ± 0.006 m off"
std::string size_words(double size, double sd, const std::string& unit) {
  const std::string number = rounded(size, sd);
  std::string out = number.starts_with('-') ? number : "+" + number;
  if (std::isfinite(sd) && sd > 0.0) out += " ± " + rounded(sd, sd);
  return with_unit(out, unit) + " off";
}

std::string age_words(double seconds) {
  if (seconds < 120.0) return fixed(std::floor(seconds), 0) + " s";
  if (seconds < 7200.0) return fixed(std::floor(seconds / 60.0), 0) + " min";
  if (seconds < 172800.0) return fixed(std::floor(seconds / 3600.0), 0) + " h";
  return fixed(std::floor(seconds / 86400.0), 0) + " d";
}

/// The datasheet's sd where the machine is now.
double datasheet_sd(const engine::ChannelModel& channel, const engine::Estimate& estimate) {
  if (!channel.sd_formula) return channel.sd;
  std::vector<double> states;
  for (const engine::StateEstimate& state : estimate.states) states.push_back(state.mean);
  return channel.sd_formula->evaluate(states, estimate.inputs, static_cast<double>(estimate.time_ns) * 1e-9);
}

std::string noise_words(const engine::ChannelModel& channel, const ChannelEstimate& told,
                        const engine::Estimate& estimate) {
  constexpr double kWorthTelling = 1.25;  // about as much as twenty readings can tell apart
  const double datasheet = datasheet_sd(channel, estimate);
  if (!(told.noise_sd > kWorthTelling * datasheet)) return "";
  return ", noise " + with_unit(two_digits(told.noise_sd), channel.unit) + " (datasheet " +
         two_digits(datasheet) + ")";
}

/// Level at which the heaviest explanation has the channel stuck; only full estimates carry explanations.
std::optional<engine::Finding> stuck_level(int channel, const engine::Estimate& estimate) {
  for (const engine::Explanation& explanation : estimate.explanations) {
    for (const engine::Finding& finding : explanation.findings) {
      if (finding.channel == channel && finding.condition == Condition::kStuck) return finding;
    }
  }
  return std::nullopt;
}

std::string stuck_words(int channel, const engine::ChannelModel& model, const engine::Estimate& estimate) {
  const std::optional<engine::Finding> level = stuck_level(channel, estimate);
  if (!level) return " is stuck";
  return " is stuck at " + with_unit(rounded(level->offset, level->offset_sd), model.unit);
}

}  // namespace

Condition leading_condition(const ChannelEstimate& channel) {
  const auto leading = std::max_element(channel.probability.begin(), channel.probability.end());
  return static_cast<Condition>(leading - channel.probability.begin());
}

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

std::string channel_words(const rig::Rig& rig, int channel, const engine::Estimate& estimate) {
  const auto index = static_cast<std::size_t>(channel);
  const engine::ChannelModel& model = rig.model->channels[index];
  const ChannelEstimate& told = estimate.channels[index];
  if (told.age_s < 0.0 && told.silent <= 0.5) return model.name + " has given no reading yet";
  if (told.silent > 0.5) {
    const std::string since = told.age_s < 0.0 ? "" : " for " + age_words(told.age_s);
    return model.name + " is silent" + since + ", " + percent(told.silent);
  }
  const Condition leading = leading_condition(told);
  const std::string sure = ", " + percent(told.probability[static_cast<std::size_t>(leading)]);
  const std::string size = size_words(told.offset, told.offset_sd, model.unit);
  switch (leading) {
    case Condition::kSound:
      return model.name + " is sound" + sure + noise_words(model, told, estimate);
    case Condition::kCreeping:
      return model.name + " creeps, " + size + sure;
    case Condition::kOffset:
      return model.name + " reads " + size + sure;
    case Condition::kWandering:
      return model.name + " wanders, " + size + sure;
    case Condition::kStuck:
      return model.name + stuck_words(channel, model, estimate) + sure;
    case Condition::kFrozen:
      return model.name + " repeats its last value" + sure;
  }
  return model.name;
}

const char* ne107_status(const ChannelEstimate& channel) {
  if (channel.silent > 0.5) return "failure";
  switch (leading_condition(channel)) {
    case Condition::kSound:
      return "good";
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

std::string rounded(double value, double sd) {
  if (!std::isfinite(value) || !std::isfinite(sd) || !(sd > 0.0)) return general(value, 6);
  const int power = last_digit_power(sd);
  if (power < -12 || power > 12) return general(value, 6);
  std::string text;
  if (power < 0) {
    text = fixed(value, -power);
  } else {
    const double step = std::pow(10.0, power);
    text = fixed(std::round(value / step) * step, 0);
  }
  const bool zero = text.find_first_of("123456789") == std::string::npos;
  return zero && text.starts_with('-') ? text.substr(1) : text;
}

}  // namespace steelyard::timeline
