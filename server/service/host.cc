// SPDX-License-Identifier: Apache-2.0
// A rig's mailbox and the pieces of work that empty it.
#include "service/host.h"

#include <spdlog/fmt/fmt.h>
#include <spdlog/spdlog.h>

#include <exception>
#include <utility>

#include "service/status.h"

namespace steelyard::service {
namespace {

std::size_t readings_in(const FeedMessage& message) {
  const auto* rows = std::get_if<Rows>(&message.content);
  return rows ? rows->rows.size() : 0;
}

}  // namespace

Host::Host(Worker& worker, const Clock& clock, const Limits& limits, std::shared_ptr<const rig::Rig> rig,
           std::uint64_t revision)
    : worker_(worker),
      clock_(clock),
      limits_(limits),
      machine_(std::move(rig), revision, clock),
      feeds_(limits, clock),
      watches_(limits) {}

bool Host::full() const {
  return readings_ >= limits_.mailbox_readings || mailbox_.size() >= limits_.mailbox_messages;
}

bool Host::post(FeedMessage message) {
  bool room = true;
  {
    const std::lock_guard lock(mutex_);
    readings_ += readings_in(message);
    const bool reads_on = !std::holds_alternative<CloseFeed>(message.content);
    mailbox_.push_back(std::move(message));
    if (full() && reads_on) {
      room = false;
      waiting_.push_back(mailbox_.back().feed);
    }
  }
  wake();
  return room;
}

grpc::Status Host::ask(Question question) {
  {
    const std::lock_guard lock(mutex_);
    if (urgent_.size() >= limits_.questions_per_rig) {
      return make_status(Error::kLimit,
                         fmt::format("{} calls wait for this rig; no more are allowed", urgent_.size()));
    }
    urgent_.emplace_back([this, question = std::move(question)] {
      question(ended_ ? nullptr : &machine_, ended_.value_or(grpc::Status::OK));
    });
  }
  wake();
  return grpc::Status::OK;
}

void Host::push_urgent(Urgent urgent) {
  {
    const std::lock_guard lock(mutex_);
    urgent_.push_back(std::move(urgent));
  }
  wake();
}

void Host::change(std::shared_ptr<const rig::Rig> rig, std::uint64_t revision, bool restart) {
  push_urgent([this, rig = std::move(rig), revision, restart] {
    machine_.change(rig, revision, restart);
    feeds_.look_up_again(machine_);
    watches_.changed();
  });
}

void Host::end_now(const grpc::Status& status) {
  push_urgent([this, status] { end(status); });
}

void Host::end_when_empty(const grpc::Status& status) {
  {
    const std::lock_guard lock(mutex_);
    end_when_empty_ = status;
  }
  wake();
}

grpc::Status Host::open_watch(const std::shared_ptr<WatchSession>& session, const Pace& pace) {
  return ask([this, session, pace](Machine* machine, const grpc::Status& ended) {
    if (machine == nullptr) return session->end(ended);
    watches_.open(session, pace, *machine, clock_.steady());
  });
}

void Host::close_watch(const std::shared_ptr<WatchSession>& session) {
  push_urgent([this, session] { watches_.close(session.get()); });
}

Job::Next Host::run() {
  try {
    return run_piece();
  } catch (const std::exception& error) {
    fail(error);
    return {true, std::nullopt};
  }
}

void Host::fail(const std::exception& error) {
  const std::string what = fmt::format("rig {}: {}", machine_.rig().name, error.what());
  spdlog::critical("{}; it takes no more readings", what);
  ended_ = make_status(Error::kInternal, what);
  feeds_.end_all(*ended_);
  watches_.end_all(*ended_);
}

Job::Next Host::run_piece() {
  run_urgent();
  const bool blocked = watches_.blocked();
  bool more = false;
  if (!blocked) {
    if (feeds_.busy()) {
      timeline::Timeline::OnMoment on_moment;
      if (watches_.wants_moments()) {
        on_moment = [this](engine::TimeNs time_ns) { watches_.moment(machine_, time_ns); };
      }
      feeds_.run_chunk(machine_, on_moment);
      watches_.changed();
      more = true;
    } else {
      more = take_message();
    }
  }
  return {more, watches_.serve(machine_, clock_.steady())};
}

void Host::run_urgent() {
  std::deque<Urgent> urgent;
  {
    const std::lock_guard lock(mutex_);
    urgent.swap(urgent_);
  }
  for (const Urgent& task : urgent) {
    try {
      task();
    } catch (const std::exception& error) {  // the tasks behind it must run all the same
      fail(error);
    }
  }
}

std::vector<std::shared_ptr<FeedSession>> Host::take_waiting() {
  const bool half_empty =
      readings_ <= limits_.mailbox_readings / 2 && mailbox_.size() <= limits_.mailbox_messages / 2;
  return half_empty ? std::exchange(waiting_, {}) : std::vector<std::shared_ptr<FeedSession>>{};
}

bool Host::take_message() {
  std::optional<FeedMessage> message;
  std::vector<std::shared_ptr<FeedSession>> may_read;
  std::optional<grpc::Status> end_now;
  {
    const std::lock_guard lock(mutex_);
    if (mailbox_.empty()) {
      end_now = std::exchange(end_when_empty_, std::nullopt);
    } else {
      message = std::move(mailbox_.front());
      mailbox_.pop_front();
      readings_ -= readings_in(*message);
      may_read = take_waiting();
    }
  }
  for (const auto& feed : may_read) feed->room();
  if (message) handle(std::move(*message));
  if (end_now) end(*end_now);
  return message.has_value();
}

void Host::handle(FeedMessage message) {
  if (ended_) return message.feed->end(*ended_);
  if (auto* open = std::get_if<OpenFeed>(&message.content)) {
    feeds_.open(message.feed, open->source, std::move(open->channels), machine_);
  } else if (auto* rows = std::get_if<Rows>(&message.content)) {
    feeds_.begin(message.feed, std::move(*rows));
  } else {
    feeds_.close(message.feed.get());
  }
}

void Host::end(const grpc::Status& status) {
  if (ended_) return;
  ended_ = status;
  watches_.flush(machine_);
  feeds_.end_all(status);
  watches_.end_all(status);
}

}  // namespace steelyard::service
