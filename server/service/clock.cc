// SPDX-License-Identifier: Apache-2.0
// The machine's clocks.
#include "service/clock.h"

namespace steelyard::service {

engine::TimeNs SystemClock::now_ns() const {
  const auto since_1970 = std::chrono::system_clock::now().time_since_epoch();
  return std::chrono::duration_cast<std::chrono::nanoseconds>(since_1970).count();
}

SteadyTime SystemClock::steady() const { return std::chrono::steady_clock::now(); }

std::chrono::system_clock::time_point deadline_after(std::chrono::milliseconds wait) {
  return std::chrono::system_clock::now() + wait;
}

}  // namespace steelyard::service
