// SPDX-License-Identifier: Apache-2.0
// See basin_sensors.h.
#include "basin_sensors.h"

#include <algorithm>
#include <cmath>

#include "basin_faults.h"

namespace steelyard::demo::basin {

namespace {

constexpr double kSonicBiasM = 0.007;
constexpr double kRadarBiasM = -0.003;
constexpr double kCellBiasM = 0.011;
constexpr double kMeterBiasM3S = 0.0004;

constexpr double kCellHeightM = 0.15;  // above the floor; it reads this much when it hangs in air
constexpr double kMeterZeroM3S = 0.005;

constexpr double kRadarDampingS = 5.0;
constexpr double kRadarPeriodS = 1.0;

// The echo rests on foam or on water for some seconds before it jumps; thicker foam holds it longer.
constexpr double kJumpChance = 0.12;  // per second

}  // namespace

double Sonic::foam_m(double time_s) {
  if (!kFoamGrows.holds(time_s)) {
    on_foam_ = false;
    return 0.0;
  }
  const double grown = kFoamGrows.part(time_s);
  if (random_.chance(kJumpChance)) on_foam_ = random_.chance(0.3 + 0.65 * grown);
  return on_foam_ ? kFoamM * grown : 0.0;
}

std::int64_t Sonic::read(const Plant& plant) {
  const double noise_m = (0.0033 + 0.0095 * plant.turbulence()) * random_.normal();
  const double level_m = plant.level_m() + kSonicBiasM + noise_m + foam_m(plant.time_s());
  const bool held = kSonicHeld.holds(plant.time_s()) || kGatewayFrozen.holds(plant.time_s());
  if (!held) shown_ = to_counts(level_m, kLevelDecimals);
  return shown_;
}

std::int64_t Radar::read(const Plant& plant) {
  const double keep = std::exp(-kRadarPeriodS / kRadarDampingS);
  const double raw_sd_m = 0.002 + 0.0045 * plant.turbulence();
  const double raw_m = plant.level_m() + kRadarBiasM + raw_sd_m * random_.normal();
  damped_m_ = started_ ? keep * damped_m_ + (1.0 - keep) * raw_m : plant.level_m() + kRadarBiasM;
  started_ = true;
  const int tremble = random_.whole(-kRadarTremble, kRadarTremble);
  if (kRadarHeld.holds(plant.time_s())) return shown_ + tremble;
  if (!kGatewayFrozen.holds(plant.time_s())) shown_ = to_counts(damped_m_, kLevelDecimals);
  return shown_;
}

std::int64_t Cell::read(const Plant& plant) {
  double vent_m = 0.0;
  if (kVentBlocked.holds(plant.time_s())) {
    vent_m = std::max(kVentMPerS * (plant.time_s() - kVentBlocked.from_s), kVentLimitM);
  }
  const double noise_m = (0.0012 + 0.0007 * plant.turbulence()) * random_.normal();
  const double column_m = std::max(plant.level_m(), kCellHeightM);
  return to_counts(column_m + kCellBiasM + vent_m + noise_m, kLevelDecimals);
}

std::int64_t Meter::read(const Plant& plant) {
  const double noise_m3s = (0.0008 + 0.015 * plant.inflow_m3s()) * random_.normal();
  const double flow_m3s = plant.inflow_m3s() + kMeterBiasM3S + noise_m3s;
  return flow_m3s < kMeterZeroM3S ? 0 : to_counts(flow_m3s, kFlowDecimals);
}

}  // namespace steelyard::demo::basin
