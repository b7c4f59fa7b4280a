// SPDX-License-Identifier: Apache-2.0
// When and how the basin's sensors go wrong: the one place that holds the script of the demo.
#pragma once

#include "basin_plant.h"
#include "log.h"

namespace steelyard::demo::basin {

inline constexpr std::int64_t kLogStartS = 1757829600;  ///< 2025-09-14T06:00:00Z
inline constexpr double kLogLengthS = 8.0 * 3600.0;

/// Seconds after the log's start for h:mm.
constexpr double at(int hours, int minutes) { return hours * 3600.0 + minutes * 60.0; }

/// A stretch of the log, [from, to).
struct Span {
  double from_s;
  double to_s;
  [[nodiscard]] constexpr bool holds(double time_s) const { return time_s >= from_s && time_s < to_s; }
  [[nodiscard]] constexpr double part(double time_s) const { return (time_s - from_s) / (to_s - from_s); }
};

/// The remote I/O box on the rim, which serves the sonic and the radar, repeats its last values.
inline constexpr Span kGatewayFrozen{at(0, 35), at(0, 37)};

/// Foam of the first flush grows under the sonic; its echo jumps between foam and water …
inline constexpr Span kFoamGrows{at(1, 32), at(1, 42)};
inline constexpr double kFoamM = 0.22;
/// … then the echo is lost and the transmitter holds its last value until the foam is hosed down.
inline constexpr Span kSonicHeld{at(1, 42), at(2, 7)};

/// Spray on the radar's horn: it keeps an old echo, which trembles by two counts.
inline constexpr Span kRadarHeld{at(2, 22), at(2, 42)};
inline constexpr int kRadarTremble = 2;

/// The cell's vent tube is blocked: as the front passes the air pressure falls, and the cell reads low.
inline constexpr Span kVentBlocked{at(3, 36), at(8, 0)};
inline constexpr double kVentMPerS = -0.025 / 3600.0;
inline constexpr double kVentLimitM = -0.10;

/// No sensor is at fault in these.
inline constexpr Upsets kUpsets{.storm_at = at(1, 15),
                                .rag_from = at(7, 4),
                                .rag_full = at(7, 24),
                                .rag_cleared = at(8, 0),
                                .rag_share = 0.4};

/// The script above as events. What follows from it (pumps switching, the weir) is noted as it happens.
[[nodiscard]] std::vector<Event> scripted_events();

}  // namespace steelyard::demo::basin
