// SPDX-License-Identifier: Apache-2.0
// Time for the service. The only place that reads a clock; tests put their own in.
#pragma once

#include <chrono>

#include "engine/model.h"

namespace steelyard::service {

using SteadyTime = std::chrono::steady_clock::time_point;

/// Safe to use from any thread.
class Clock {
 public:
  virtual ~Clock() = default;
  /// The service's own clock: nanoseconds since 1970-01-01T00:00:00Z. May jump. Refuses readings from the
  /// future and dates what people do; never enters an estimate.
  [[nodiscard]] virtual engine::TimeNs now_ns() const = 0;
  /// Never jumps: paces watches and measures how long ago something happened.
  [[nodiscard]] virtual SteadyTime steady() const = 0;
};

/// The machine's clocks.
class SystemClock final : public Clock {
 public:
  [[nodiscard]] engine::TimeNs now_ns() const override;
  [[nodiscard]] SteadyTime steady() const override;
};

/// For deadlines that gRPC wants as wall-clock time.
[[nodiscard]] std::chrono::system_clock::time_point deadline_after(std::chrono::milliseconds wait);

}  // namespace steelyard::service
