// SPDX-License-Identifier: Apache-2.0
// Time for the client: the only place that asks the system for it.
#pragma once

#include <chrono>

namespace steelyard::client {

using SteadyTime = std::chrono::steady_clock::time_point;

/// For waiting and elapsed times; never jumps.
inline SteadyTime steady_now() { return std::chrono::steady_clock::now(); }

/// For deadlines that a library wants as wall-clock time; may jump.
inline std::chrono::system_clock::time_point wall_now() { return std::chrono::system_clock::now(); }

}  // namespace steelyard::client
