// SPDX-License-Identifier: Apache-2.0
// See basin_faults.h.
#include "basin_faults.h"

namespace steelyard::demo::basin {

std::vector<Event> scripted_events() {
  const double storm_to = kUpsets.storm_at + 13 * 600.0;
  return {
      {kGatewayFrozen.from_s, kGatewayFrozen.to_s, "sonic", "frozen", 0.0},
      {kGatewayFrozen.from_s, kGatewayFrozen.to_s, "radar", "frozen", 0.0},
      {kUpsets.storm_at, storm_to, "plant", "storm", 0.0},
      {kFoamGrows.from_s, kFoamGrows.to_s, "sonic", "foam", kFoamM},
      {kSonicHeld.from_s, kSonicHeld.to_s, "sonic", "held", 0.0},
      {kRadarHeld.from_s, kRadarHeld.to_s, "radar", "held trembling", 0.0},
      {kVentBlocked.from_s, kVentBlocked.to_s, "cell", "drift", kVentLimitM},
      {kUpsets.rag_from, kUpsets.rag_cleared, "plant", "ragged pump", kUpsets.rag_share * kPumpM3S},
  };
}

}  // namespace steelyard::demo::basin
