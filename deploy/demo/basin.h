// SPDX-License-Identifier: Apache-2.0
// The storm-water basin of the demo: eight hours with one storm, four sensor faults and two upsets of the
// plant.
#pragma once

#include <cstdint>

#include "log.h"

namespace steelyard::demo {

/// Equal seeds give equal logs. Truth: time,level,inflow,pump,overflow (delivered pump flow), one line a
/// second.
[[nodiscard]] Log make_basin_log(std::uint64_t seed);

}  // namespace steelyard::demo
