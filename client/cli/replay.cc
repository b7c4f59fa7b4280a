// SPDX-License-Identifier: Apache-2.0
// steelyard replay: a log through the engine, without a server. The log streams by; what waits in memory is
// one horizon of it.
#include <memory>
#include <optional>
#include <string>
#include <utility>
#include <vector>

#include "cli/columns.h"
#include "cli/commands.h"
#include "cli/episode_rows.h"
#include "cli/files.h"
#include "cli/ordered_log.h"
#include "cli/output.h"
#include "cli/signals.h"
#include "timeline/episodes.h"
#include "timeline/stretches.h"
#include "timeline/timeline.h"
#include "timeline/words.h"

namespace steelyard::client {
namespace {

constexpr double kNsPerS = 1e9;

struct Options {
  std::string rig;
  std::string log;
  std::string out;
  std::string channels;
  bool words = false;
  TimeStyle time = TimeStyle::kSeconds;
  bool settled = false;
  std::string report;  // not yet there
  std::string episodes;
};

Names names_of_model(const engine::Model& model) {
  Names names;
  for (const engine::StateModel& state : model.states) names.states.push_back(state.name);
  for (const engine::ChannelModel& channel : model.channels) {
    names.channels.push_back(channel.name);
    names.units.push_back(channel.unit);
  }
  return names;
}

/// One run from a log to the outputs.
class Replay {
 public:
  Replay(const Options& options, std::shared_ptr<const rig::Rig> rig, LogFile& file)
      : options_(options),
        rig_(std::move(rig)),
        names_(names_of_model(*rig_->model)),
        timeline_(timeline()),
        source_(timeline_.source_number(file.name)),
        join_ns_(static_cast<engine::TimeNs>(rig_->response_s * kNsPerS)),
        stretches_(names_.channels.size(), join_ns_),
        calls_(calls()),
        out_(options.out),
        channels_(options.channels),
        episodes_(options.episodes),
        log_(file, rig_, "replay"),
        out_of_range_(names_.channels.size()) {}

  int run() {
    if (!log_.open()) return kWrongInput;
    if (!open_outputs()) return kFailed;
    std::vector<timeline::Reading> ready;
    while (going() && log_.next(ready)) step(ready);
    if (interrupted()) {
      log_.progress().say("steelyard: stopped");
      return kFailed;
    }
    return finish();
  }

 private:
  bool open_outputs() {
    for (Output* const output : {&out_, &channels_, &episodes_, &words_}) {
      if (!is_asked_for(output) || output->open()) continue;
      complain(output->error());
      return false;
    }
    std::string text;
    append_estimate_header(text, names_);
    out_.write(text);
    if (!with_channels()) return true;
    text.clear();
    append_channel_header(text);
    channels_.write(text);
    return true;
  }

  [[nodiscard]] bool with_channels() const { return !options_.channels.empty(); }
  [[nodiscard]] bool with_episodes() const { return !options_.episodes.empty(); }
  [[nodiscard]] bool is_asked_for(const Output* output) const {
    return (output != &channels_ || with_channels()) && (output != &episodes_ || with_episodes());
  }
  [[nodiscard]] bool going() const { return !interrupted() && !out_.failed() && !channels_.failed(); }

  void step(std::vector<timeline::Reading>& ready) {
    for (timeline::Reading& reading : ready) reading.source = source_;
    timeline_.run(ready, outcomes_, [this](engine::TimeNs time_ns) { moment(time_ns); });
    for (std::size_t i = 0; i < outcomes_.size(); ++i) count(ready[i], outcomes_[i]);
  }

  void count(const timeline::Reading& reading, timeline::Outcome outcome) {
    if (outcome == timeline::Outcome::kOutOfRange && !reading.signal.is_input) {
      ++out_of_range_[static_cast<std::size_t>(reading.signal.index)];
    }
    if (outcome == timeline::Outcome::kNotFinite || outcome == timeline::Outcome::kTooOld ||
        outcome == timeline::Outcome::kWrongParts) {
      log_.refuse({log_.name(), 0, 0, signal_name(*rig_, reading.signal),
                   "reading of " + time_text(reading.time_ns, options_.time) + " could not be taken"});
    }
  }

  timeline::Timeline timeline() {
    if (!options_.settled) return timeline::Timeline(rig_);
    const bool full = with_channels() || options_.words || with_episodes();
    return {rig_, full ? engine::Detail::kFull : engine::Detail::kBrief,
            [this](const engine::Estimate& settled) {
              estimate_ = settled;
              row();
            }};
  }

  void moment(engine::TimeNs time_ns) {
    if (!going() || options_.settled) return;
    const auto detail = with_channels() ? engine::Detail::kFull : engine::Detail::kBrief;
    timeline_.estimate(time_ns, detail, estimate_);
    row();
  }

  void row() {
    if (!going()) return;
    text_.clear();
    append_estimate_row(text_, estimate_, options_.time);
    out_.write(text_);
    if (with_channels()) {
      text_.clear();
      append_channel_rows(text_, names_, estimate_, options_.time);
      channels_.write(text_);
    }
    if (!options_.words && !with_episodes()) return;
    has_full_ = false;
    stretches_.add(estimate_, calls_);
  }

  timeline::Stretches::Calls calls() {
    timeline::Stretches::Calls calls;
    calls.full = [this]() -> const engine::Estimate& { return full(); };
    if (with_episodes()) {
      calls.rival = [this](int channel) { return timeline::rival_of(*rig_, channel, full()); };
    }
    if (!options_.words) return calls;
    calls.words = [this](int channel) {
      return timeline::channel_words(*rig_, channel, full(), stretches_.since(channel));
    };
    calls.on_change = [this](const timeline::Change& change) {
      tell(time_text(change.time_ns, options_.time) + "  " + change.words);
    };
    return calls;
  }

  /// Of the moment at hand. Few moments need it; settled estimates come with all detail if anything does.
  const engine::Estimate& full() {
    if (with_channels() || options_.settled) return estimate_;
    if (!has_full_) timeline_.estimate(estimate_.time_ns, engine::Detail::kFull, full_);
    has_full_ = true;
    return full_;
  }

  /// Words go where the data does not.
  void tell(const std::string& line) {
    if (options_.out.empty()) {
      log_.progress().say(line);
    } else {
      words_.write(line + "\n");
      words_.flush();
    }
  }

  void summarise() {
    std::vector<timeline::Stretch> all = stretches_.finish();
    if (with_episodes()) write_episodes(all);
    if (!options_.words) return;
    std::string text =
        timeline::stretches_text(all, stretches_.left_out(), names_.channels, names_.units,
                                 [this](engine::TimeNs t) { return time_text(t, options_.time); });
    text.pop_back();  // tell() ends the line
    tell(text);
  }

  void write_episodes(const std::vector<timeline::Stretch>& stretches) {
    std::string text;
    append_episode_header(text);
    for (const timeline::Episode& episode :
         timeline::episodes_of(stretches, *rig_->model, timeline_.last_sources(), join_ns_)) {
      const auto channel = static_cast<std::size_t>(episode.stretch.channel);
      append_episode_rows(text, names_, rig_->model->channels[channel].parts(), episode, options_.time);
    }
    episodes_.write(text);
    if (stretches_.left_out() == 0) return;
    log_.progress().say("steelyard: " + std::to_string(stretches_.left_out()) +
                        " more episodes were left out: at most " +
                        std::to_string(timeline::Stretches::kMost) + " are written");
  }

  void notes() {
    if (const auto early = timeline_.engine().settled_early(); early > 0)
      log_.progress().say(
          "steelyard: " + std::to_string(early) +
          " estimates were settled before the lag was over: it holds more readings than are kept");
    for (std::size_t i = 0; i < out_of_range_.size(); ++i) {
      if (out_of_range_[i] == 0) continue;
      log_.progress().say("steelyard: " + names_.channels[i] + ": " + std::to_string(out_of_range_[i]) +
                          " readings outside its range were not fused");
    }
  }

  int finish() {
    if (going()) timeline_.settle_rest();
    if ((options_.words || with_episodes()) && going()) summarise();
    notes();
    const bool all_used = log_.close();
    for (Output* const output : {&out_, &channels_, &episodes_}) {
      if (!is_asked_for(output) || output->finish()) continue;
      complain(output->error());
      return kFailed;
    }
    if (log_.read_failed()) return kFailed;
    return all_used ? kDone : kWrongInput;
  }

  const Options& options_;
  std::shared_ptr<const rig::Rig> rig_;
  Names names_;
  timeline::Timeline timeline_;
  std::uint32_t source_;
  engine::TimeNs join_ns_;
  timeline::Stretches stretches_;
  timeline::Stretches::Calls calls_;
  Output out_;
  Output channels_;
  Output episodes_;
  Output words_{""};
  OrderedLog log_;
  std::vector<std::uint64_t> out_of_range_;
  std::vector<timeline::Outcome> outcomes_;
  engine::Estimate estimate_;
  engine::Estimate full_;  // for words and episodes
  bool has_full_ = false;  // of this moment
  std::string text_;
};

int replay(const Options& options) {
  if (!options.report.empty()) {
    complain("replay: --report is not there yet");
    return kWrongInput;
  }
  if (!options.out.empty() && options.out == options.channels) {
    complain("replay: --out and --channels are the same file");
    return kWrongInput;
  }
  if (!options.episodes.empty() &&
      (options.episodes == options.out || options.episodes == options.channels)) {
    complain("replay: --episodes is the same file as another output");
    return kWrongInput;
  }
  std::shared_ptr<const rig::Rig> rig = load_rig_file(options.rig);
  if (!rig) return kWrongInput;
  LogFile log;
  if (!open_log(options.log, log)) return kWrongInput;
  return Replay(options, std::move(rig), log).run();
}

}  // namespace

void add_replay(CLI::App& app, Run& run) {
  CLI::App* const command =
      app.add_subcommand("replay", "Run a log through the engine and write the estimates as CSV");
  const auto options = std::make_shared<Options>();
  command->add_option("--rig", options->rig, "Rig file (YAML)")->required()->type_name("FILE");
  command->add_option("--log", options->log, "Log (CSV, long or wide; - is stdin)")
      ->required()
      ->type_name("FILE");
  command->add_option("--out", options->out, "File for the estimates; stdout if not given")
      ->type_name("FILE");
  command
      ->add_option("--channels", options->channels,
                   "File for one row per time and channel (of a vector channel: per part): trust, "
                   "probabilities, status, …")
      ->type_name("FILE");
  command->add_flag(
      "--words", options->words,
      "Tell each change of a channel and the stretches in which it was not sound, in words, on stderr "
      "(on stdout if --out is given)");
  add_time_option(*command, options->time);
  command->add_flag("--settled", options->settled,
                    "Write settled estimates: each from the readings up to the rig's lag after it as well");
  command->add_option("--report", options->report, "Not there yet")->type_name("FILE");
  command
      ->add_option(
          "--episodes", options->episodes,
          "File for one row per spell in which a channel was not sound: when, what, how large, what else "
          "it could have been, and which spells have one cause")
      ->type_name("FILE");
  command->footer(
      "The parts of a vector channel stand in value, value2, … of a long log, in <name>.1, <name>.2, … of a "
      "wide "
      "one.\n"
      "A cell of the log that cannot be used refuses its own reading alone: the first 10 are shown, all are "
      "counted,\n"
      "and when everything else has been used and written the exit code is 2. A header that cannot be used "
      "ends the\n"
      "replay at once, also with 2. Rows may be out of order within the rig's horizon; older ones are "
      "refused.");
  command->callback([options, &run] { run = [options] { return replay(*options); }; });
}

}  // namespace steelyard::client
