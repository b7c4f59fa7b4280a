// SPDX-License-Identifier: Apache-2.0
// Puts the readings of a log in the order of time while it streams by: what may still be overtaken by an
// earlier reading waits, at most one horizon of the log (and one of the rig's longest delay) at a time.
#pragma once

#include <cstddef>
#include <cstdint>
#include <vector>

#include "lib/log/log_csv.h"
#include "timeline/timeline.h"

namespace steelyard::client {

class Reorder {
 public:
  /// Readings that may wait at once; beyond it the oldest times are released early, and readings older than
  /// those are then too old.
  static constexpr std::size_t kMaxWaiting = 1U << 21U;

  explicit Reorder(const rig::Rig& rig, std::size_t max_waiting = kMaxWaiting);

  /// False: the reading is older than the horizon allows (or than what has been released) and was not taken.
  [[nodiscard]] bool add(const LogReading& reading);
  /// How far a reading lies behind the newest one so far, for messages.
  [[nodiscard]] double behind_s(const LogReading& reading) const;

  /// Readings that come out at once; then all of the last one's time.
  static constexpr std::size_t kMostAtOnce = 1U << 14U;

  /// Appends to `out` the readings that nothing can overtake any more, in order of time less delay, and in
  /// the order of their arrival where that is equal; the next call goes on beyond kMostAtOnce. All readings
  /// of one time come out together. Sequences rise.
  void release(std::vector<timeline::Reading>& out);
  /// The same for what is left; done when nothing comes any more.
  void release_rest(std::vector<timeline::Reading>& out);

 private:
  struct Waiting {
    engine::TimeNs key_ns;  // time less delay, as the engine will see it
    std::uint64_t arrival;
    engine::TimeNs time_ns;
    rig::Signal signal;
    engine::Quality quality;
    std::uint8_t parts;
    std::uint32_t slot;  // where its values stand in values_
  };
  [[nodiscard]] std::uint32_t put(const timeline::Values& values);
  static bool later(const Waiting& a, const Waiting& b);
  [[nodiscard]] engine::TimeNs key_ns(const LogReading& reading) const;
  [[nodiscard]] engine::TimeNs bound_ns() const;
  void release_until(engine::TimeNs bound_ns, std::vector<timeline::Reading>& out);
  [[nodiscard]] bool may_pop(const std::vector<timeline::Reading>& out, std::size_t before) const;
  void pop(std::vector<timeline::Reading>& out);

  std::vector<engine::TimeNs> delay_ns_;  // by channel
  engine::TimeNs horizon_ns_ = 0;
  engine::TimeNs longest_delay_ns_ = 0;
  std::size_t max_waiting_;
  std::vector<Waiting> heap_;
  std::vector<double> values_;  // in slots of stride_ numbers: as many as the rig's longest channel has parts
  std::vector<std::uint32_t> free_slots_;
  std::size_t stride_ = 1;
  engine::TimeNs popped_ns_ = 0;  // key of the last one that came out
  std::uint64_t arrivals_ = 0;
  std::uint64_t sequence_ = 0;
  engine::TimeNs newest_ns_ = 0;
  engine::TimeNs released_ns_ = 0;  // everything before this is out
  bool any_released_ = false;
};

}  // namespace steelyard::client
