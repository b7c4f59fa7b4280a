// SPDX-License-Identifier: Apache-2.0
// Six minutes of a cart in its yard (cart.yaml), with one beacon's range lengthened for a while.
#pragma once

#include <cstdint>

#include "log.h"

namespace steelyard::demo {

/// Equal seeds give equal logs. Truth: time,east,north,heading, five lines a second.
[[nodiscard]] Log make_cart_log(std::uint64_t seed);

}  // namespace steelyard::demo
