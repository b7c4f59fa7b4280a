// SPDX-License-Identifier: Apache-2.0
// Five minutes of a gantry crane's trolley (trolley.yaml) whose encoder wheel slips once.
#pragma once

#include <cstdint>

#include "log.h"

namespace steelyard::demo {

/// Equal seeds give equal logs. Truth: time,position,speed, ten lines a second.
[[nodiscard]] Log make_trolley_log(std::uint64_t seed);

}  // namespace steelyard::demo
