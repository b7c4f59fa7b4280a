// SPDX-License-Identifier: Apache-2.0
// steelyard watch: the live estimate. A refreshing screen in a terminal, CSV in a pipe, or changes in words.
#include <unistd.h>

#include <atomic>
#include <chrono>
#include <cstdlib>
#include <functional>
#include <memory>
#include <optional>
#include <stop_token>
#include <string>
#include <utility>
#include <vector>

#include "cli/bridge.h"
#include "cli/columns.h"
#include "cli/commands.h"
#include "cli/files.h"
#include "cli/output.h"
#include "cli/screen.h"
#include "cli/signals.h"
#include "lib/client.h"
#include "lib/clock.h"
#include "timeline/stretches.h"

namespace steelyard::client {
namespace {

constexpr double kNsPerS = 1e9;
constexpr double kScreenRateHz = 4.0;  // as fast as a person can read

struct Options {
  std::string from;
  std::string rig;
  bool once = false;
  bool words = false;
  bool every_moment = false;
  double rate_hz = 0.0;       // 0: the usual one
  double until_idle_s = 0.0;  // 0: no end
  TimeStyle time = TimeStyle::kSeconds;
};

/// Ends the watch when no new reading has come for a while. The clock is looked at by another thread.
class Idle {
 public:
  explicit Idle(double after_s) : after_s_(after_s) {}

  void reading_came() { newest_ = steady_now().time_since_epoch().count(); }
  [[nodiscard]] bool over() const {
    const SteadyTime::rep newest = newest_;
    if (!(after_s_ > 0.0) || newest == 0) return false;
    const SteadyTime::duration since = steady_now().time_since_epoch() - SteadyTime::duration(newest);
    return std::chrono::duration<double>(since).count() > after_s_;
  }

 private:
  double after_s_;
  std::atomic<SteadyTime::rep> newest_ = 0;  // 0: none yet
};

/// What is done with pictures.
class Show {
 public:
  virtual ~Show() = default;
  /// False: enough.
  virtual bool picture(const Picture& picture) = 0;
  virtual void end() {}
};

class ShowRows : public Show {
 public:
  ShowRows(Output& out, TimeStyle style) : out_(out), style_(style) {}

  bool picture(const Picture& picture) override {
    std::string text;
    if (!names_) {
      names_ = picture.names;
      append_estimate_header(text, *names_);
    }
    if (picture.names != *names_) {
      complain("watch: the rig has changed and with it the columns; start again");
      return false;
    }
    append_estimate_row(text, picture.estimate, style_);
    out_.write(text);
    out_.flush();
    return true;
  }

 private:
  Output& out_;
  TimeStyle style_;
  std::optional<Names> names_;
};

class ShowScreen : public Show {
 public:
  ShowScreen(Output& out, bool once)
      : out_(out), once_(once), screen_(!once && std::getenv("NO_COLOR") == nullptr) {
    if (!once_) out_.write("\x1b[?25l\x1b[2J");
  }

  bool picture(const Picture& picture) override {
    std::string text = once_ ? "" : "\x1b[H";
    const std::vector<std::string> lines = screen_.draw(picture, size());
    for (std::size_t i = 0; i < lines.size(); ++i) {
      text += lines[i];
      if (!once_) text += "\x1b[K";
      if (once_ || i + 1 < lines.size()) text += once_ ? "\n" : "\r\n";
    }
    if (!once_) text += "\x1b[J";
    out_.write(text);
    out_.flush();
    return true;
  }

  void end() override {
    if (once_) return;
    out_.write("\x1b[?25h\r\n");
    out_.flush();
  }

 private:
  [[nodiscard]] ScreenSize size() const {
    ScreenSize size = terminal_size();
    if (once_) size.rows = 1000;
    return size;
  }

  Output& out_;
  bool once_;
  Screen screen_;
};

class ShowWords : public Show {
 public:
  ShowWords(Output& out, const Options& options, double response_s)
      : out_(out),
        style_(options.time),
        once_(options.once),
        join_ns_(static_cast<engine::TimeNs>(response_s * kNsPerS)) {}

  bool picture(const Picture& picture) override {
    if (once_) return every_channel(picture);
    if (!stretches_ || picture.names != names_) {
      names_ = picture.names;
      stretches_.emplace(names_.channels.size(), join_ns_);
    }
    timeline::Stretches::Calls calls;
    calls.words = [&picture](int channel) { return picture.words[static_cast<std::size_t>(channel)]; };
    calls.on_change = [this](const timeline::Change& change) { line(change.time_ns, change.words); };
    stretches_->add(picture.estimate, calls);
    return true;
  }

  void end() override {
    if (!stretches_) return;
    const std::vector<timeline::Stretch> all = stretches_->finish();
    out_.write(timeline::stretches_text(all, stretches_->left_out(), names_.channels, names_.units,
                                        [this](engine::TimeNs t) { return time_text(t, style_); }));
    out_.flush();
  }

 private:
  bool every_channel(const Picture& picture) {
    for (const std::string& words : picture.words) line(picture.estimate.time_ns, words);
    return true;
  }
  void line(engine::TimeNs time_ns, const std::string& words) {
    out_.write(time_text(time_ns, style_) + "  " + words + "\n");
    out_.flush();
  }

  Output& out_;
  TimeStyle style_;
  bool once_;
  engine::TimeNs join_ns_;
  Names names_;
  std::optional<timeline::Stretches> stretches_;
};

std::unique_ptr<Show> make_show(Output& out, const Options& options, double response_s) {
  if (options.words) return std::make_unique<ShowWords>(out, options, response_s);
  if (::isatty(STDOUT_FILENO) == 1) return std::make_unique<ShowScreen>(out, options.once);
  return std::make_unique<ShowRows>(out, options.time);
}

v1::WatchRequest request_of(const Options& options) {
  v1::WatchRequest request;
  request.set_rig(options.rig);
  const bool screen = !options.words && !options.every_moment && ::isatty(STDOUT_FILENO) == 1;
  if (options.every_moment) {
    request.set_every_moment(true);
  } else if (options.rate_hz > 0.0) {
    request.set_max_rate_hz(options.rate_hz);
  } else if (screen) {
    request.set_max_rate_hz(kScreenRateHz);
  }
  return request;
}

/// One watch, kept up over breaks of the connection.
class Watching {
 public:
  Watching(const Options& options, Client& client, std::stop_token stop, Idle& idle)
      : options_(options), client_(client), stop_(std::move(stop)), idle_(idle), out_("") {}

  int run(double response_s) {
    if (!out_.open()) return kFailed;
    const std::unique_ptr<Show> show = make_show(out_, options_, response_s);
    const grpc::Status status = watch(*show);
    show->end();
    if (!status.ok() && !stop_.stop_requested()) return fail_with("watch", status);
    if (out_.finish()) return ended_well_ ? kDone : kFailed;
    complain(out_.error());
    return kFailed;
  }

 private:
  grpc::Status watch(Show& show) {
    const v1::WatchRequest request = request_of(options_);
    while (true) {
      grpc::Status status = client_.watch(
          request, [this, &show](const v1::WatchResponse& update) { return take(update, show); }, stop_);
      if (status.error_code() != grpc::StatusCode::UNAVAILABLE || stop_.stop_requested()) return status;
      complain("watch: connection lost (" + status.error_message() + "); trying again");
      status = client_.connect(stop_);
      if (!status.ok()) return status;
    }
  }

  bool take(const v1::WatchResponse& update, Show& show) {
    const Picture picture = picture_of(update.moment());
    if (!picture.started) return true;  // the rig's start is no estimate of anything
    if (!newest_ns_ || picture.clock_ns != *newest_ns_) {
      newest_ns_ = picture.clock_ns;
      idle_.reading_came();
    }
    ended_well_ = show.picture(picture);
    return ended_well_ && !options_.once && !out_.failed();
  }

  const Options& options_;
  Client& client_;
  std::stop_token stop_;
  Idle& idle_;
  Output out_;
  std::optional<engine::TimeNs> newest_ns_;
  bool ended_well_ = true;
};

int watch(const Options& options) {
  Client client(options.from);
  Idle idle(options.until_idle_s);
  std::stop_source stop;
  const InterruptWatch interrupt([&stop] { stop.request_stop(); }, [&idle] { return idle.over(); });
  grpc::Status status = client.connect(stop.get_token());
  if (!status.ok()) return fail_with("watch: " + options.from, status);
  const std::shared_ptr<const rig::Rig> rig = fetch_rig(client, options.rig, status);
  if (!rig) return fail_with("watch: " + options.rig, status);
  return Watching(options, client, stop.get_token(), idle).run(rig->response_s);
}

}  // namespace

void add_watch(CLI::App& app, Run& run) {
  CLI::App* const command =
      app.add_subcommand("watch", "Show the live estimate: a screen in a terminal, CSV in a pipe");
  const auto options = std::make_shared<Options>();
  command->add_option("--from", options->from, "Address of the service, HOST:PORT")
      ->required()
      ->type_name("HOST:PORT");
  command->add_option("--rig", options->rig, "Name of a rig that the service has")
      ->required()
      ->type_name("NAME");
  command->add_flag("--once", options->once, "Show one picture and end");
  command->add_flag(
      "--words", options->words,
      "Tell each change of a channel in words and, at the end, the stretches in which it was not sound");
  command->add_flag("--every-moment", options->every_moment,
                    "Every distinct reading time, none left out; a slow reader then holds up the sources");
  command->add_option("--rate", options->rate_hz, "At most so many updates a second (10; in a terminal 4)")
      ->check(CLI::Range(0.001, 1000.0))
      ->excludes("--every-moment");
  command
      ->add_option("--until-idle", options->until_idle_s,
                   "End when no new reading has come for so many seconds")
      ->check(CLI::Range(0.1, 1e9));
  add_time_option(*command, options->time);
  command->footer("Ends on Ctrl-C with exit 0. Set NO_COLOR for a screen without colour.");
  command->callback([options, &run] { run = [options] { return watch(*options); }; });
}

}  // namespace steelyard::client
