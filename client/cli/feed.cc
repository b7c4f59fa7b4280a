// SPDX-License-Identifier: Apache-2.0
// steelyard feed: sends a log to a service, in the order of time, as fast as it takes it or at the pace of
// the log. A reading's sequence number is its place in that order, so a second run of the same log goes on
// where the first one ended, and a third one finds everything taken.
#include <algorithm>
#include <cstddef>
#include <cstdint>
#include <memory>
#include <optional>
#include <stop_token>
#include <string>
#include <utility>
#include <vector>

#include "cli/batches.h"
#include "cli/bridge.h"
#include "cli/commands.h"
#include "cli/files.h"
#include "cli/ordered_log.h"
#include "cli/pace.h"
#include "cli/signals.h"
#include "lib/client.h"

namespace steelyard::client {
namespace {

struct Options {
  std::string to;
  std::string rig;
  std::string log;
  std::string pace = "fast";
  std::string source;
};

/// One log on its way to one rig.
class Sending {
 public:
  Sending(const Options& options, double times, Client& client, std::shared_ptr<const rig::Rig> rig,
          LogFile& file)
      : batch_(rig->model->inputs.size()),
        pace_(times),
        log_(file, rig, "feed"),
        feed_(client.feed({.rig = options.rig,
                           .source = options.source,
                           .channels = channel_table(*rig->model),
                           .on_refused = {},
                           .on_break = [this](const grpc::Status& status) { on_break(status); }})) {}

  int run() {
    if (!log_.open()) return kWrongInput;
    const InterruptWatch interrupt([this] { feed_->cancel(); });
    grpc::Status status = feed_->open();
    if (!status.ok()) return fail("cannot feed", status);
    next_ = feed_->progress().next_sequence;
    if (next_ > 1) say("going on with reading " + std::to_string(next_));
    status = send_all();
    if (status.ok()) status = feed_->finish();
    if (!status.ok()) return fail("the feed broke off", status);
    return finish();
  }

 private:
  void say(const std::string& line) { log_.progress().say("steelyard: " + line); }

  void on_break(const grpc::Status& status) {
    // On a thread of the feed's: stderr alone, and a line in one piece.
    complain(status.ok() ? "connected again"
                         : "connection lost (" + status.error_message() + "); trying again");
  }

  int fail(const std::string& what, const grpc::Status& status) {
    if (!interrupted()) return fail_with(what, status);
    say("stopped; everything up to reading " + std::to_string(feed_->progress().taken) +
        " is taken, and the same command goes on from there");
    return kFailed;
  }

  grpc::Status send_all() {
    std::vector<timeline::Reading> ready;
    while (log_.next(ready)) {
      for (const timeline::Reading& reading : ready) {
        if (reading.sequence < next_) continue;
        if (const grpc::Status status = send(reading); !status.ok()) return status;
      }
    }
    return interrupted() ? grpc::Status::CANCELLED : send_batch();
  }

  grpc::Status send(const timeline::Reading& reading) {
    if (batch_.full_before(reading, pace_.paced())) {
      if (const grpc::Status status = send_batch(); !status.ok()) return status;
    }
    batch_.add(reading);
    return grpc::Status::OK;
  }

  grpc::Status send_batch() {
    if (batch_.rows() == 0) return grpc::Status::OK;
    if (!pace_.wait_for(batch_.last_ns())) return grpc::Status::CANCELLED;
    return feed_->send(batch_.take());
  }

  int finish() {
    const bool all_used = log_.close();
    const FeedProgress progress = feed_->progress();
    for (const std::string& name : progress.unknown_channels)
      say(name + ": the service's rig has no such channel");
    const std::size_t shown = std::min<std::size_t>(progress.refusals.size(), Refusals::kShown);
    for (std::size_t i = 0; i < shown; ++i) {
      const v1::Refused& one = progress.refusals[i];
      say("reading " + std::to_string(one.sequence()) + " refused: " + one.message());
    }
    if (progress.refused > 0) say(std::to_string(progress.refused) + " readings refused by the service");
    if (log_.read_failed()) return kFailed;
    return all_used && progress.refused == 0 ? kDone : kWrongInput;
  }

  BatchMaker batch_;
  Pace pace_;
  OrderedLog log_;
  std::unique_ptr<Feed> feed_;
  std::uint64_t next_ = 1;
};

int feed(Options options) {
  const std::optional<double> times = parse_pace(options.pace);
  if (!times) {
    complain("feed: --pace: is " + shown(options.pace) +
             "; must be real, fast or x and a number, such as x60");
    return kWrongInput;
  }
  if (options.source.empty() && options.log == "-") {
    complain("feed: --source: is missing; must be given when the log comes from stdin");
    return kWrongInput;
  }
  if (options.source.size() > kMostSourceBytes) {
    complain("feed: --source: has " + std::to_string(options.source.size()) +
             " bytes; must have at most 255");
    return kWrongInput;
  }
  LogFile log;
  if (!open_log(options.log, log)) return kWrongInput;
  if (options.source.empty()) options.source = default_source(options.log);
  Client client(options.to);
  std::shared_ptr<const rig::Rig> rig;
  std::stop_source stop;
  {
    const InterruptWatch interrupt([&stop] { stop.request_stop(); });
    grpc::Status status = client.connect(stop.get_token());
    if (!status.ok()) return fail_with("feed: " + options.to, status);
    rig = fetch_rig(client, options.rig, status);
    if (!rig) return fail_with("feed: " + options.rig, status);
  }
  return Sending(options, *times, client, std::move(rig), log).run();
}

}  // namespace

void add_feed(CLI::App& app, Run& run) {
  CLI::App* const command = app.add_subcommand("feed", "Send a log to a service");
  const auto options = std::make_shared<Options>();
  command->add_option("--to", options->to, "Address of the service, HOST:PORT")
      ->required()
      ->type_name("HOST:PORT");
  command->add_option("--rig", options->rig, "Name of a rig that the service has")
      ->required()
      ->type_name("NAME");
  command->add_option("--log", options->log, "Log (CSV, long or wide; - is stdin)")
      ->required()
      ->type_name("FILE");
  command
      ->add_option(
          "--pace", options->pace,
          "real: at the pace of the log; fast: as fast as it is taken (default); xN: N times the pace "
          "of the log")
      ->type_name("PACE");
  command
      ->add_option("--source", options->source,
                   "Who feeds; the file's name and a hash of its first 4 KiB if not given")
      ->type_name("NAME");
  command->footer(
      "Connects for up to 30 s and after a break goes on by itself; run again, it goes on where it ended. "
      "Exit 0: all\n"
      "is taken. Exit 2: all else is taken, but some readings were refused (shown on stderr), or the log or "
      "rig is wrong.");
  command->callback([options, &run] { run = [options] { return feed(*options); }; });
}

}  // namespace steelyard::client
