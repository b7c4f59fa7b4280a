// SPDX-License-Identifier: Apache-2.0
// One rig that runs: its timeline, its revision and when its newest reading came. Belongs to one worker's
// thread; nothing here locks.
#pragma once

#include <cstdint>
#include <memory>
#include <span>
#include <string_view>
#include <vector>

#include "rig/rig.h"
#include "service/clock.h"
#include "timeline/stretches.h"
#include "timeline/timeline.h"

namespace steelyard::service {

/// An estimate with what is needed to put it on the wire.
struct Picture {
  std::shared_ptr<const rig::Rig> rig;
  std::uint64_t revision = 0;
  engine::Estimate estimate;
  std::vector<engine::TimeNs> since_ns;  ///< by channel, since when it has not been sound; 0: it is
  engine::TimeNs clock_ns = 0;           ///< the rig's; 0 while !started
  engine::TimeNs behind_ns = 0;          ///< the service's clock minus the estimate's time; 0 while !started
  bool started = false;
  bool at_horizon = false;  ///< the newest reading is one horizon old or more
};

class Machine {
 public:
  Machine(std::shared_ptr<const rig::Rig> rig, std::uint64_t revision, const Clock& clock);

  /// A new revision. `restart`: its meaning differs and the posterior starts anew; else it goes on.
  void change(std::shared_ptr<const rig::Rig> rig, std::uint64_t revision, bool restart);

  [[nodiscard]] std::uint32_t source_number(std::string_view source) {
    return timeline_->source_number(source);
  }

  /// See timeline::Timeline::run.
  void run(std::span<timeline::Reading> readings, std::vector<timeline::Outcome>& outcomes,
           const timeline::Timeline::OnMoment& on_moment);

  /// The machine at its own clock, or at `time_ns` (not before it).
  [[nodiscard]] Picture at_clock();
  [[nodiscard]] Picture at(engine::TimeNs time_ns);
  /// The machine now: its clock plus the time since its newest reading came, one horizon at most. That way
  /// the service's own clock stays out of the estimate, and a log of last year can be fed at its own pace.
  [[nodiscard]] Picture now();

  [[nodiscard]] const rig::Rig& rig() const { return *rig_; }
  [[nodiscard]] std::uint64_t revision() const { return revision_; }
  [[nodiscard]] bool started() const { return timeline_->started(); }
  [[nodiscard]] engine::TimeNs clock_ns() const { return started() ? timeline_->clock() : 0; }
  [[nodiscard]] engine::TimeNs horizon_ns() const;

 private:
  [[nodiscard]] engine::TimeNs since_newest_ns() const;
  void restart();
  /// Lets the stretches see the machine at a moment that has been run.
  void follow(engine::TimeNs time_ns);

  const Clock& clock_;
  std::shared_ptr<const rig::Rig> rig_;
  std::uint64_t revision_;
  std::unique_ptr<timeline::Timeline> timeline_;
  std::unique_ptr<timeline::Stretches> stretches_;  // for the words: since when
  engine::Estimate followed_;                       // storage of follow()
  SteadyTime newest_came_;
};

}  // namespace steelyard::service
