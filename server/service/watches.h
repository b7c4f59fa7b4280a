// SPDX-License-Identifier: Apache-2.0
// The watches of one rig, as its worker sees them: which update is due for whom. Belongs to one worker's
// thread.
#pragma once

#include <cstdint>
#include <memory>
#include <optional>
#include <vector>

#include "service/limits.h"
#include "service/machine.h"
#include "service/sessions.h"

namespace steelyard::service {

/// When a watch gets its updates; see WatchRequest.
struct Pace {
  enum class Kind : std::uint8_t { kOnChange, kFixedRate, kEveryMoment };
  Kind kind = Kind::kOnChange;
  SteadyTime::duration interval{};  ///< least (on change) or exact (fixed rate) time between two updates
};

class WatchDesk {
 public:
  explicit WatchDesk(const Limits& limits) : limits_(limits) {}

  /// Sends the present picture at once, or ends the watch with kLimit.
  void open(const std::shared_ptr<WatchSession>& session, const Pace& pace, Machine& machine, SteadyTime now);
  void close(const WatchSession* session);
  void end_all(const grpc::Status& status);

  /// The machine has changed; watches on change are due as soon as their pace allows.
  void changed();
  /// For watches of every moment.
  void moment(Machine& machine, engine::TimeNs time_ns);
  [[nodiscard]] bool wants_moments() const;
  /// A watch of every moment is so far behind that the rig must wait. Its backlog's fall below half wakes the
  /// rig.
  [[nodiscard]] bool blocked() const;

  /// Sends what is due, and says when the next is.
  [[nodiscard]] std::optional<SteadyTime> serve(Machine& machine, SteadyTime now);
  /// Sends what waits for its pace, due or not: before the end.
  void flush(Machine& machine);

 private:
  struct Watch {
    std::shared_ptr<WatchSession> session;
    Pace pace;
    SteadyTime due;
    bool changed = false;
    std::uint64_t beat = 0;
  };

  const Limits& limits_;
  std::vector<Watch> watches_;
};

}  // namespace steelyard::service
