// SPDX-License-Identifier: Apache-2.0
// steelyard check: says what a rig means, for the person who wrote it.
#include <algorithm>
#include <iterator>
#include <memory>
#include <string>
#include <utility>
#include <vector>

#include "cli/accuracy.h"
#include "cli/commands.h"
#include "cli/files.h"
#include "cli/observe.h"
#include "cli/output.h"
#include "cli/report_text.h"

namespace steelyard::client {
namespace {

/// The whole report on one rig.
class Report {
 public:
  explicit Report(const rig::Rig& rig)
      : rig_(rig),
        model_(*rig.model),
        at_start_(model_, start_of(model_)),
        near_start_(model_, near_start_of(model_)) {
    for (std::size_t i = 0; i < model_.channels.size(); ++i) all_.push_back(static_cast<int>(i));
  }

  std::string text() {
    machine();
    states();
    inputs();
    channels();
    out_ += accuracy_text(rig_);
    causes();
    modes();
    cautions();
    return std::move(out_);
  }

 private:
  void line(const std::string& text) { out_ += text + "\n"; }

  void machine() {
    line("rig " + rig_.name + ": " + counted(model_.states.size(), "state") + ", " +
         counted(model_.inputs.size(), "input") + ", " + counted(model_.channels.size(), "channel"));
    line("  response  " + long_duration(rig_.response_s));
    line("  horizon   " + long_duration(rig_.horizon_s) + ", lateness accepted");
    line("  lag       " + long_duration(rig_.lag_s) + ", of settled estimates");
    line(rig_.motion_is_affine ? "  motion    linear: runs by exact discretisation"
                               : "  motion    not linear: runs by sigma points");
  }

  void states() {
    line("\nstates");
    const std::vector<bool> shown = shown_by(all_);
    for (std::size_t i = 0; i < model_.states.size(); ++i) {
      const engine::StateModel& state = model_.states[i];
      std::string text = "  " + state.name + ": starts at " + number(state.start) + " ± " +
                         with_unit(state.start_sd, state.unit) + ", unrest " + number(state.unrest) +
                         " per √s";
      if (state.needs) text += ", needs ± " + with_unit(*state.needs, state.unit);
      line(text);
      if (!shown[i]) caution(state.name + ": no channel shows this state, not even all together");
    }
  }

  void inputs() {
    if (model_.inputs.empty()) return;
    line("\ninputs");
    for (const engine::InputModel& input : model_.inputs) {
      std::string text = "  " + input.name + ": " + with_unit(input.start, input.unit) +
                         " until its first value, sd " + number(input.sd) + ", ";
      text += input.period_s > 0.0
                  ? "a value holds " + rig::duration_text(input.period_s) + ", then it is unknown"
                  : "a value holds until the next";
      text += " within " + number(input.lo) + " to " + with_unit(input.hi, input.unit);
      line(text);
      if (!(input.period_s > 0.0))
        caution(input.name + ": has no period, so a lost signal passes for a steady one");
    }
  }

  void channels() {
    line("\nchannels");
    for (const int channel : all_) one_channel(channel);
  }

  void one_channel(int channel) {
    const auto index = static_cast<std::size_t>(channel);
    const engine::ChannelModel& model = model_.channels[index];
    line("  " + title(index));
    for (int part = 0; part < model.parts(); ++part) {
      line((part == 0 ? "    reads        " : "                 ") + reading(index, part));
    }
    for (const std::string& manner : manners(model)) line("                 " + manner);
    line("    shows alone  " + shown_words({channel}));
    line("    without it   " + lost_words(channel));
    line("    faults       every " + long_duration(model.fails_every_s) + "; recovers in " +
         long_duration(model.recovers_in_s));
    line("                 changes in " + long_duration(model.changes_in_s) + "; offsets of the size of " +
         offset_sizes(model) + "; strays " + number(model.strays));
    line("    noise        remembered for " + long_duration(model.memory_s) + "; the datasheet is worth " +
         number(model.prior_readings) + " readings");
    channel_cautions(channel);
  }

  std::string title(std::size_t index) const {
    const rig::ChannelLabels none;
    const rig::ChannelLabels& labels = index < rig_.labels.size() ? rig_.labels[index] : none;
    std::string text = model_.channels[index].name;
    for (const std::string* label : {&labels.tag, &labels.where, &labels.serial}) {
      if (!label->empty()) text += " · " + *label;
    }
    return text;
  }

  std::string reading(std::size_t index, int part) const {
    const engine::ChannelModel& channel = model_.channels[index];
    const engine::PartModel& model = channel.part(part);
    const bool affine = index < rig_.reading_is_affine.size() && rig_.reading_is_affine[index];
    std::string text = channel.parts() > 1 ? channel.name + "." + std::to_string(part + 1) + ": " : "";
    text += affine ? "linear" : "not linear: by sigma points";
    text += model.sd_formula ? ", sd by formula" : ", sd " + with_unit(model.sd, model.unit);
    text += ", standing bias " + number(model.bias_sd) + ", range " + number(model.lo) + " to " +
            with_unit(model.hi, model.unit);
    if (model.resolution > 0.0) text += ", resolution " + number(model.resolution);
    if (part > 0) return text;
    if (channel.cutoff) text += ", cutoff " + number(*channel.cutoff);
    if (channel.modulo > 0.0) text += ", modulo " + number(channel.modulo);
    if (channel.period_s > 0.0) text += ", period " + rig::duration_text(channel.period_s);
    if (channel.delay_s > 0.0) text += ", delay " + rig::duration_text(channel.delay_s);
    return text;
  }

  /// What is declared of few channels, a line each.
  static std::vector<std::string> manners(const engine::ChannelModel& model) {
    std::vector<std::string> out;
    if (model.correlation > 0.0) {
      out.push_back("noise correlated by " + number(model.correlation) + " over a period");
    }
    if (!model.part_correlation.empty()) {
      std::vector<std::string> pairs;
      for (const double pair : model.part_correlation) pairs.push_back(number(pair));
      out.push_back("noise of the parts correlated: " + joined(pairs, ""));
    }
    if (model.time_sd_s > 0.0) out.push_back("times uncertain by " + rig::duration_text(model.time_sd_s));
    if (!model.on_change) return out;
    std::string text = "sends when it has moved by " + with_unit(model.on_change->deadband, model.unit);
    const double heartbeat_s = model.on_change->heartbeat_s;
    text += heartbeat_s > 0.0 ? ", or after " + rig::duration_text(heartbeat_s) : ", may be quiet for ever";
    out.push_back(text);
    return out;
  }

  static std::string offset_sizes(const engine::ChannelModel& model) {
    std::vector<std::string> sizes;
    for (int part = 0; part < model.parts(); ++part) {
      sizes.push_back(with_unit(model.part(part).offset_size, model.part(part).unit));
    }
    return joined(sizes, "");
  }

  void causes() {
    line("\nfaults that strike together");
    for (const engine::CommonCause& cause : model_.common) {
      std::vector<std::string> names;
      for (const int channel : cause.channels) {
        names.push_back(model_.channels[static_cast<std::size_t>(channel)].name);
      }
      line("  " + joined(names, "") + ": share " + number(cause.share) + " of their faults");
    }
    line("  channels of one source: share " + number(model_.freeze_share) + " of their freezes");
  }

  /// A state counts as shown if it is so at the start or near it.
  std::vector<bool> shown_by(const std::vector<int>& channels) const {
    std::vector<bool> shown = at_start_.shown_states(channels);
    const std::vector<bool> near = near_start_.shown_states(channels);
    for (std::size_t i = 0; i < shown.size(); ++i) shown[i] = shown[i] || near[i];
    return shown;
  }

  std::string shown_words(const std::vector<int>& channels) const {
    const std::vector<bool> at_start = at_start_.shown_states(channels);
    const std::vector<bool> somewhere = shown_by(channels);
    std::vector<std::string> names;
    for (std::size_t i = 0; i < somewhere.size(); ++i) {
      if (!somewhere[i]) continue;
      names.push_back(model_.states[i].name + (at_start[i] ? "" : " (away from the start)"));
    }
    const auto rank =
        std::max(at_start_.shown_space(channels).rows(), near_start_.shown_space(channels).rows());
    return joined(names, "no state by itself") + " (rank " + std::to_string(rank) + " of " +
           std::to_string(model_.states.size()) + ")";
  }

  std::vector<int> all_but(int channel) const {
    std::vector<int> others;
    std::copy_if(all_.begin(), all_.end(), std::back_inserter(others),
                 [channel](int one) { return one != channel; });
    return others;
  }

  std::string lost_words(int channel) const {
    const std::vector<bool> with = shown_by(all_);
    const std::vector<bool> without = shown_by(all_but(channel));
    std::vector<std::string> lost;
    for (std::size_t i = 0; i < with.size(); ++i) {
      if (with[i] && !without[i]) lost.push_back(model_.states[i].name);
    }
    return lost.empty() ? "no state is lost" : "lost: " + joined(lost, "");
  }

  void channel_cautions(int channel) {
    const engine::ChannelModel& model = model_.channels[static_cast<std::size_t>(channel)];
    const std::vector<int> others = all_but(channel);
    if (!at_start_.foretold(channel, others) && !near_start_.foretold(channel, others)) {
      caution(model.name +
              ": no other channel tells what it ought to read, so its offset cannot be told from a "
              "change of the machine");
    }
    if (!(model.period_s > 0.0)) caution(model.name + ": has no period, so its silence is not judged");
    const auto every_part = [&model](double engine::PartModel::*what) {
      for (int part = 0; part < model.parts(); ++part) {
        if (!(model.part(part).*what > 0.0)) return false;
      }
      return true;
    };
    if (!every_part(&engine::PartModel::resolution)) {
      caution(model.name + ": has no resolution; exact repeats are judged as if it were sd/100");
    }
    if (!every_part(&engine::PartModel::bias_sd)) {
      caution(model.name + ": has no bias_sd, so a standing difference from the others counts as a fault");
    }
    if (model.delay_s > 0.0)
      caution(model.name + ": has a delay, which replay can do and the service cannot yet");
  }

  void modes() {
    line("\nthe machine's disturbances");
    mode("jolted", model_.jolt);
    mode("still", model_.still);
    if (model_.still.on) resting();
  }

  // A still machine comes to rest as a usual one comes to be still.
  void resting() {
    line("  resting: of a still machine, as often and as long, unrest times " +
         number(model_.still.times * model_.still.times));
  }

  void mode(const char* name, const engine::ModeModel& mode) {
    if (!mode.on) return line(std::string("  ") + name + ": none");
    line(std::string("  ") + name + ": every " + long_duration(mode.every_s) + ", for " +
         long_duration(mode.last_s) + ", unrest times " + number(mode.times));
  }

  void caution(std::string text) { cautions_.push_back(std::move(text)); }

  void cautions() {
    line("\ncautions");
    for (const std::string& text : cautions_) line("  " + text);
    line(
        "  Sensors that fail together in the same way can outvote a right one; keep one on another "
        "principle.");
    line("  What no channel and no law of the machine shows is not seen: keep calibrating.");
    line("  Trust is a probability under this rig: replay your own logs before you rely on it.");
    line("  This advises and is no safety function: trips and interlocks must not depend on it.");
  }

  const rig::Rig& rig_;
  const engine::Model& model_;
  Linearised at_start_;
  Linearised near_start_;
  std::vector<int> all_;
  std::vector<std::string> cautions_;
  std::string out_;
};

int check(const std::string& path) {
  const std::shared_ptr<const rig::Rig> rig = load_rig_file(path);
  if (!rig) return kWrongInput;
  Output out("");
  if (!out.open()) return kFailed;
  out.write(Report(*rig).text());
  if (out.finish()) return kDone;
  complain(out.error());
  return kFailed;
}

}  // namespace

void add_check(CLI::App& app, Run& run) {
  CLI::App* const command =
      app.add_subcommand("check",
                         "Say what a rig means: linear or not, what each channel shows, what is lost without "
                         "each channel and each "
                         "pair and how well the rest knows the states, the settings in force");
  const auto path = std::make_shared<std::string>();
  command->add_option("RIG", *path, "Rig file (YAML)")->required()->type_name("FILE");
  command->callback([path, &run] { run = [path] { return check(*path); }; });
}

}  // namespace steelyard::client
