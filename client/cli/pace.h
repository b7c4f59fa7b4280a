// SPDX-License-Identifier: Apache-2.0
// At which pace a log is fed.
#pragma once

#include <optional>
#include <string_view>

#include "engine/model.h"
#include "lib/clock.h"

namespace steelyard::client {

/// "fast" → 0 (as fast as it is taken), "real" → 1, "x60" → 60: how many times faster than the log. nullopt:
/// no pace.
[[nodiscard]] std::optional<double> parse_pace(std::string_view text);

/// Waits until a time of the log is due, counted from the first one asked for.
class Pace {
 public:
  explicit Pace(double times) : times_(times) {}

  [[nodiscard]] bool paced() const { return times_ > 0.0; }
  /// How long until `time_ns` is due, in seconds; 0 or less: it is.
  [[nodiscard]] double left_s(engine::TimeNs time_ns, SteadyTime now);
  /// False: the command was asked to end meanwhile.
  [[nodiscard]] bool wait_for(engine::TimeNs time_ns);

 private:
  double times_;
  std::optional<engine::TimeNs> first_ns_;
  SteadyTime begin_;
};

}  // namespace steelyard::client
