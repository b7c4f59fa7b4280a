// SPDX-License-Identifier: Apache-2.0
// Runs a rig's timeline and takes pictures of it.
#include "service/machine.h"

#include <algorithm>
#include <cmath>

namespace steelyard::service {

Machine::Machine(std::shared_ptr<const rig::Rig> rig, std::uint64_t revision, const Clock& clock)
    : clock_(clock), rig_(std::move(rig)), revision_(revision), newest_came_(clock.steady()) {
  restart();
}

void Machine::restart() {
  timeline_ = std::make_unique<timeline::Timeline>(rig_);
  const auto join_ns = static_cast<engine::TimeNs>(std::llround(rig_->response_s * 1e9));
  // Only the stretches under way are of use here.
  stretches_ = std::make_unique<timeline::Stretches>(rig_->model->channels.size(), join_ns, 0);
}

void Machine::change(std::shared_ptr<const rig::Rig> rig, std::uint64_t revision, bool restart) {
  rig_ = std::move(rig);
  revision_ = revision;
  if (restart) this->restart();
}

void Machine::run(std::span<timeline::Reading> readings, std::vector<timeline::Outcome>& outcomes,
                  const timeline::Timeline::OnMoment& on_moment) {
  const bool was_started = started();
  const engine::TimeNs before = clock_ns();
  timeline::Timeline::OnMoment seen;
  if (on_moment) {
    seen = [&](engine::TimeNs time_ns) {
      follow(time_ns);
      on_moment(time_ns);
    };
  }
  timeline_->run(readings, outcomes, seen);
  // Where nobody watches every moment, one look at the end of a chunk will do.
  if (!on_moment && timeline_->engine().started()) follow(timeline_->engine().time());
  if (started() && (!was_started || clock_ns() > before)) newest_came_ = clock_.steady();
}

void Machine::follow(engine::TimeNs time_ns) {
  timeline_->estimate(time_ns, engine::Detail::kBrief, followed_);
  stretches_->add(followed_, {});
}

Picture Machine::at_clock() { return at(clock_ns()); }

Picture Machine::at(engine::TimeNs time_ns) {
  Picture picture;
  timeline_->estimate(time_ns, engine::Detail::kFull, picture.estimate);
  picture.estimate.time_ns = time_ns;
  for (std::size_t i = 0; i < picture.estimate.channels.size(); ++i) {
    picture.since_ns.push_back(stretches_->since(static_cast<int>(i)));
  }
  picture.rig = rig_;
  picture.revision = revision_;
  picture.started = started();
  picture.clock_ns = clock_ns();
  picture.behind_ns = picture.started ? clock_.now_ns() - time_ns : 0;
  picture.at_horizon = started() && since_newest_ns() >= horizon_ns();
  return picture;
}

Picture Machine::now() {
  if (!started()) return at_clock();
  return at(clock_ns() + std::min(since_newest_ns(), horizon_ns()));
}

engine::TimeNs Machine::horizon_ns() const {
  // A horizon of more than 100 years is as good as any, and leaves room for sums.
  constexpr double kMostNs = 3.2e18;
  return static_cast<engine::TimeNs>(std::llround(std::clamp(rig_->horizon_s * 1e9, 0.0, kMostNs)));
}

engine::TimeNs Machine::since_newest_ns() const {
  const auto since =
      std::chrono::duration_cast<std::chrono::nanoseconds>(clock_.steady() - newest_came_).count();
  return std::max<engine::TimeNs>(0, since);
}

}  // namespace steelyard::service
