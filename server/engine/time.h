// SPDX-License-Identifier: Apache-2.0
// Between nanoseconds, in which times are kept, and seconds, in which laws and rates are.
#pragma once

#include <cmath>

#include "engine/model.h"

namespace steelyard::engine {

[[nodiscard]] inline double seconds(TimeNs ns) { return static_cast<double>(ns) * 1e-9; }
[[nodiscard]] inline TimeNs nanoseconds(double s) { return static_cast<TimeNs>(std::llround(s * 1e9)); }

}  // namespace steelyard::engine
