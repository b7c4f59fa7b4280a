// SPDX-License-Identifier: Apache-2.0
// Pacing of watches. A picture is made once for all watches that are due in the same pass.
#include "service/watches.h"

#include <spdlog/fmt/fmt.h>

#include <algorithm>

#include "service/convert.h"
#include "service/status.h"

namespace steelyard::service {
namespace {

std::shared_ptr<const v1::Moment> to_message(const Picture& picture) {
  auto message = std::make_shared<v1::Moment>();
  fill_moment(picture, *message);
  return message;
}

}  // namespace

void WatchDesk::open(const std::shared_ptr<WatchSession>& session, const Pace& pace, Machine& machine,
                     SteadyTime now) {
  if (watches_.size() >= limits_.watches_per_rig) {
    session->end(make_status(Error::kLimit, fmt::format("rig {}: has {} watches; no more are allowed",
                                                        machine.rig().name, watches_.size())));
    return;
  }
  watches_.push_back({session, pace, now + pace.interval, false, 1});
  session->offer(to_message(pace.kind == Pace::Kind::kFixedRate ? machine.now() : machine.at_clock()), 1);
}

void WatchDesk::close(const WatchSession* session) {
  std::erase_if(watches_, [&](const Watch& watch) { return watch.session.get() == session; });
}

void WatchDesk::end_all(const grpc::Status& status) {
  for (const Watch& watch : watches_) watch.session->end(status);
  watches_.clear();
}

void WatchDesk::changed() {
  for (Watch& watch : watches_) watch.changed = true;
}

bool WatchDesk::wants_moments() const {
  return std::any_of(watches_.begin(), watches_.end(),
                     [](const Watch& watch) { return watch.pace.kind == Pace::Kind::kEveryMoment; });
}

void WatchDesk::moment(Machine& machine, engine::TimeNs time_ns) {
  std::shared_ptr<const v1::Moment> message;
  for (Watch& watch : watches_) {
    if (watch.pace.kind != Pace::Kind::kEveryMoment) continue;
    if (!message) message = to_message(machine.at(time_ns));
    watch.session->offer(message, ++watch.beat);
  }
}

bool WatchDesk::blocked() const {
  return std::any_of(watches_.begin(), watches_.end(), [&](const Watch& watch) {
    return watch.pace.kind == Pace::Kind::kEveryMoment &&
           watch.session->backlog() > limits_.moments_waiting / 2;
  });
}

std::optional<SteadyTime> WatchDesk::serve(Machine& machine, SteadyTime now) {
  std::shared_ptr<const v1::Moment> at_clock;
  std::shared_ptr<const v1::Moment> at_now;
  std::optional<SteadyTime> next;
  for (Watch& watch : watches_) {
    if (watch.pace.kind == Pace::Kind::kEveryMoment) continue;
    const bool fixed = watch.pace.kind == Pace::Kind::kFixedRate;
    if (!fixed && !watch.changed) continue;
    if (watch.due <= now) {
      auto& message = fixed ? at_now : at_clock;
      if (!message) message = to_message(fixed ? machine.now() : machine.at_clock());
      watch.changed = false;
      watch.session->offer(message, ++watch.beat);
      // A fixed rate keeps its grid, unless the worker came too late for it: then it starts anew from here.
      const bool keep_grid = fixed && watch.due + watch.pace.interval > now;
      watch.due = (keep_grid ? watch.due : now) + watch.pace.interval;
      if (!fixed) continue;
    }
    next = next ? std::min(*next, watch.due) : watch.due;
  }
  return next;
}

void WatchDesk::flush(Machine& machine) {
  for (Watch& watch : watches_) {
    if (watch.pace.kind == Pace::Kind::kOnChange && watch.changed) {
      watch.changed = false;
      watch.session->offer(to_message(machine.at_clock()), ++watch.beat);
    }
  }
}

}  // namespace steelyard::service
