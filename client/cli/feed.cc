// SPDX-License-Identifier: Apache-2.0
// steelyard feed: sends a log to a service, in the order of time, as fast as it takes it or at the pace of
// the log. A reading's sequence number is its place in that order, so a second run of the same log goes on
// where the first one ended, and a third one finds everything taken.
#include <algorithm>
#include <array>
#include <charconv>
#include <chrono>
#include <cmath>
#include <cstdint>
#include <filesystem>
#include <fstream>
#include <memory>
#include <mutex>
#include <optional>
#include <string>
#include <string_view>
#include <thread>
#include <utility>
#include <vector>

#include "cli/bridge.h"
#include "cli/commands.h"
#include "cli/files.h"
#include "cli/progress.h"
#include "cli/refusals.h"
#include "cli/signals.h"
#include "lib/client.h"
#include "lib/clock.h"
#include "lib/log/log_csv.h"
#include "lib/log/reorder.h"

namespace steelyard::client {
namespace {

constexpr std::size_t kMostBatchRows = 65536;  // the service takes no more
constexpr std::size_t kUsualBatchRows = 1024;
constexpr std::uint64_t kRowsPerStep = 256;
constexpr std::size_t kMostSourceBytes = 255;

struct Options {
  std::string to;
  std::string rig;
  std::string log;
  std::string pace = "fast";
  std::string source;
};

/// How many times faster than the log; 0: as fast as possible. nullopt: not a pace.
std::optional<double> parse_pace(std::string_view text) {
  if (text == "fast") return 0.0;
  if (text == "real") return 1.0;
  if (!text.starts_with('x')) return std::nullopt;
  const std::optional<double> times = parse_number(text.substr(1));
  if (!times || !std::isfinite(*times) || !(*times > 0.0)) return std::nullopt;
  return times;
}

/// FNV-1a (Fowler, Noll, Vo): it tells logs of one name apart, nothing more.
std::uint64_t hash_of(std::string_view text) {
  std::uint64_t hash = 14695981039346656037U;
  for (const char c : text) hash = (hash ^ static_cast<unsigned char>(c)) * 1099511628211U;
  return hash;
}

std::string default_source(const std::string& log) {
  std::ifstream file(log, std::ios::binary);
  std::string begin(4096, '\0');
  file.read(begin.data(), static_cast<std::streamsize>(begin.size()));
  begin.resize(static_cast<std::size_t>(file.gcount()));
  std::array<char, 17> hex{};
  const auto [end, error] = std::to_chars(hex.data(), hex.data() + hex.size(), hash_of(begin), 16);
  const std::string hash = error == std::errc() ? std::string(hex.data(), end) : "0";
  std::string name = std::filesystem::path(log).filename().string();
  const std::size_t most = kMostSourceBytes - hash.size() - 1;
  if (name.size() > most) name.erase(0, name.size() - most);
  while (!name.empty() && (static_cast<unsigned char>(name.front()) & 0xC0U) == 0x80U) name.erase(0, 1);
  return name + "-" + hash;
}

/// Readings of one time stay together; a batch ends where the time changes.
class BatchMaker {
 public:
  explicit BatchMaker(std::size_t inputs) : inputs_(inputs) {}

  void add(const timeline::Reading& reading) {
    if (rows() == 0) {
      batch_.set_first_sequence(reading.sequence);
      batch_.set_base_time_ns(reading.time_ns);
      last_ns_ = reading.time_ns;
    }
    const auto row = static_cast<std::uint32_t>(rows());
    batch_.add_time_step_ns(reading.time_ns - last_ns_);
    batch_.add_channel(number_of(reading.signal));
    batch_.add_value(reading.value);
    if (reading.quality != engine::Quality::kGood) {
      batch_.add_quality_row(row);
      batch_.add_quality(static_cast<v1::ReadingQuality>(reading.quality));
    }
    last_ns_ = reading.time_ns;
  }
  [[nodiscard]] std::size_t rows() const { return static_cast<std::size_t>(batch_.value_size()); }
  [[nodiscard]] engine::TimeNs last_ns() const { return last_ns_; }
  v1::Batch take() { return std::exchange(batch_, {}); }

  /// The opening's table: inputs first, then channels, in the rig's order.
  static std::vector<std::string> table(const engine::Model& model) {
    std::vector<std::string> names;
    for (const engine::InputModel& input : model.inputs) names.push_back(input.name);
    for (const engine::ChannelModel& channel : model.channels) names.push_back(channel.name);
    return names;
  }

 private:
  [[nodiscard]] std::uint32_t number_of(const rig::Signal& signal) const {
    const auto index = static_cast<std::size_t>(signal.index);
    return static_cast<std::uint32_t>(signal.is_input ? index : inputs_ + index);
  }

  std::size_t inputs_;
  v1::Batch batch_;
  engine::TimeNs last_ns_ = 0;
};

/// When a reading of the log is due.
class Pace {
 public:
  explicit Pace(double times) : times_(times) {}

  [[nodiscard]] bool paced() const { return times_ > 0.0; }
  /// False: interrupted.
  bool wait_for(engine::TimeNs time_ns) {
    if (!first_ns_) {
      first_ns_ = time_ns;
      begin_ = steady_now();
    }
    const double after_s = static_cast<double>(time_ns - *first_ns_) * 1e-9 / times_;
    while (!interrupted()) {
      const double left_s = after_s - std::chrono::duration<double>(steady_now() - begin_).count();
      if (left_s <= 0.0) return true;
      std::this_thread::sleep_for(std::chrono::duration<double>(std::min(left_s, 0.1)));
    }
    return false;
  }

 private:
  double times_;
  std::optional<engine::TimeNs> first_ns_;
  SteadyTime begin_;
};

/// One log on its way to one rig.
class Sending {
 public:
  Sending(const Options& options, double times, Client& client, std::shared_ptr<const rig::Rig> rig,
          LogFile& log)
      : rig_(std::move(rig)),
        reorder_(*rig_),
        batch_(rig_->model->inputs.size()),
        pace_(times),
        progress_("feed", log.bytes),
        refusals_(progress_),
        file_(log.name),
        reader_(*log.stream, log.name, names_of(rig_), [this](const rig::Problem& one) { wrong(one); }),
        feed_(client.feed({.rig = options.rig,
                           .source = options.source,
                           .channels = BatchMaker::table(*rig_->model),
                           .on_refused = {},
                           .on_break = [this](const grpc::Status& status) { on_break(status); }})) {}

  int run() {
    if (!reader_.open()) return kWrongInput;
    header_is_read_ = true;
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
  void say(const std::string& line) { progress_.say("steelyard: " + line); }

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

  void wrong(const rig::Problem& problem) {
    if (header_is_read_) {
      refusals_.add(problem);
    } else {
      progress_.say(problem.text());
    }
  }

  grpc::Status send_all() {
    LogRow row;
    std::uint64_t rows = 0;
    while (!interrupted() && reader_.next(row)) {
      for (const LogReading& reading : row.readings) {
        if (!reorder_.add(reading)) {
          refusals_.add(too_old(*rig_, file_, row, reading, reorder_.behind_s(reading)));
        }
      }
      if (++rows % kRowsPerStep != 0) continue;
      progress_.show(reader_.bytes_read());
      if (const grpc::Status status = step(false); !status.ok()) return status;
    }
    if (const grpc::Status status = step(true); !status.ok()) return status;
    return send_batch();
  }

  grpc::Status step(bool last) {
    ready_.clear();
    if (last) {
      reorder_.release_rest(ready_);
    } else {
      reorder_.release(ready_);
    }
    for (const timeline::Reading& reading : ready_) {
      if (interrupted()) return grpc::Status::CANCELLED;
      if (reading.sequence < next_) continue;
      if (const grpc::Status status = send(reading); !status.ok()) return status;
    }
    return grpc::Status::OK;
  }

  grpc::Status send(const timeline::Reading& reading) {
    const bool new_time = batch_.rows() > 0 && reading.time_ns != batch_.last_ns();
    const bool full = batch_.rows() >= (new_time ? kUsualBatchRows : kMostBatchRows);
    if (full || (new_time && pace_.paced())) {
      if (const grpc::Status status = send_batch(); !status.ok()) return status;
    }
    batch_.add(reading);
    return grpc::Status::OK;
  }

  grpc::Status send_batch() {
    if (batch_.rows() == 0) return grpc::Status::OK;
    if (pace_.paced() && !pace_.wait_for(batch_.last_ns())) return grpc::Status::CANCELLED;
    return feed_->send(batch_.take());
  }

  int finish() {
    refusals_.close();
    const FeedProgress progress = feed_->progress();
    for (const std::string& name : progress.unknown_channels)
      say(name + ": the service's rig has no such channel");
    const std::size_t shown = std::min<std::size_t>(progress.refusals.size(), Refusals::kShown);
    for (std::size_t i = 0; i < shown; ++i) {
      const v1::Refused& one = progress.refusals[i];
      say("reading " + std::to_string(one.sequence()) + " refused: " + one.message());
    }
    if (progress.refused > 0) say(std::to_string(progress.refused) + " readings refused by the service");
    if (reader_.read_failed()) return kFailed;
    return refusals_.count() > 0 || progress.refused > 0 ? kWrongInput : kDone;
  }

  std::shared_ptr<const rig::Rig> rig_;
  Reorder reorder_;
  BatchMaker batch_;
  Pace pace_;
  Progress progress_;
  Refusals refusals_;
  std::string file_;
  LogReader reader_;
  std::unique_ptr<Feed> feed_;
  std::uint64_t next_ = 1;
  bool header_is_read_ = false;
  std::vector<timeline::Reading> ready_;
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
  command->add_option("--to", options->to, "Address of the service, HOST:PORT")->required();
  command->add_option("--rig", options->rig, "Name of a rig that the service has")->required();
  command->add_option("--log", options->log, "Log (CSV, long or wide; - is stdin)")->required();
  command->add_option("--pace", options->pace,
                      "real: at the pace of the log; fast: as fast as it is taken (default); xN: N times the "
                      "pace of the log");
  command->add_option("--source", options->source,
                      "Who feeds; the file's name and a hash of its first 4 KiB if not given");
  command->footer(
      "Connects for up to 30 s and after a break goes on by itself; run again, it goes on where it ended. "
      "Exit 0: all\n"
      "is taken. Exit 2: all else is taken, but some readings were refused (shown on stderr), or the log or "
      "rig is wrong.");
  command->callback([options, &run] { run = [options] { return feed(*options); }; });
}

}  // namespace steelyard::client
