// SPDX-License-Identifier: Apache-2.0
// See basin_plant.h.
#include "basin_plant.h"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace steelyard::demo::basin {

namespace {

constexpr double kStartLevelM = 1.2;
constexpr double kAssistLevelM = 1.8;
constexpr double kStopLevelM = 0.4;
constexpr double kRampUpS = 12.0;
constexpr double kRampDownS = 9.0;
constexpr std::array<double, 2> kAgainstCurve{0.985, 1.02};  // real pumps against the maker's curve

constexpr double kStartHour = 6.0;  // clock time at the log's start

// Rain on 6 ha of roofs and streets, blocks of ten minutes, mm/h: 29 mm in two hours, two bursts.
constexpr double kPavedM2 = 60000.0;
constexpr double kBlockS = 600.0;
constexpr std::array<double, 13> kRainMmH{14, 17, 13, 10.5, 9, 9, 10, 12.5, 15, 16, 14, 9, 4};
constexpr double kQuickShare = 0.65;
constexpr double kQuickS = 240.0;
constexpr double kSlowS = 3000.0;

/// Dry-weather inflow with its day swing: 5 L/s at 3 h, 12 L/s at 15 h.
double dry_inflow_m3s(double time_s) {
  const double hour = kStartHour + time_s / 3600.0;
  return 0.0085 - 0.0035 * std::cos(2.0 * std::numbers::pi * (hour - 3.0) / 24.0);
}

/// Rain on the paved area, m3/s.
double rain_m3s(double since_storm_s) {
  if (since_storm_s < 0.0) return 0.0;
  const auto block = static_cast<std::size_t>(since_storm_s / kBlockS);
  return block < kRainMmH.size() ? kRainMmH[block] * 1e-3 / 3600.0 * kPavedM2 : 0.0;
}

/// Sharp-crested weir: 1.84 · length · head^1.5, metric.
double weir_m3s(double level_m) {
  const double head_m = std::max(level_m - kCrestM, 0.0);
  return 1.84 * kWeirLengthM * head_m * std::sqrt(head_m);
}

}  // namespace

void Pumps::step(double level_m, double lead_health) {
  if (level_m >= kStartLevelM) wanted_[0] = true;
  if (level_m >= kAssistLevelM) wanted_[1] = true;
  if (level_m <= kStopLevelM) wanted_ = {false, false};
  const double curve = kPumpM3S * (1.0 + 0.015 * (level_m - 2.0));  // less head to lift from a full basin
  reported_ = 0.0;
  delivered_ = 0.0;
  for (std::size_t i = 0; i < running_.size(); ++i) {
    const double change = wanted_[i] ? kStepS / kRampUpS : -kStepS / kRampDownS;
    running_[i] = std::clamp(running_[i] + change, 0.0, 1.0);
    reported_ += running_[i] * curve;
    delivered_ += running_[i] * curve * kAgainstCurve[i] * (i == 0 ? lead_health : 1.0);
  }
}

Plant::Plant(std::uint64_t seed, const Upsets& upsets, double start_level_m)
    : upsets_(upsets), random_(seed, 0), gusts_(120.0, kStepS), level_m_(start_level_m) {
  step_inflow();
}

double Plant::lead_health() const {
  if (time_s_ < upsets_.rag_from || time_s_ >= upsets_.rag_cleared) return 1.0;
  const double grown = (time_s_ - upsets_.rag_from) / (upsets_.rag_full - upsets_.rag_from);
  return 1.0 - upsets_.rag_share * std::min(grown, 1.0);
}

double Plant::turbulence() const { return std::min(inflow_ / 0.200, 1.0); }

void Plant::step_inflow() {
  const double rain = rain_m3s(time_s_ - upsets_.storm_at);
  quick_[0] += (kQuickShare * rain - quick_[0]) * kStepS / kQuickS;
  quick_[1] += (quick_[0] - quick_[1]) * kStepS / kQuickS;
  slow_ += ((1.0 - kQuickShare) * rain - slow_) * kStepS / kSlowS;
  const double smooth = dry_inflow_m3s(time_s_) + quick_[1] + slow_;
  inflow_ = smooth * (1.0 + 0.03 * gusts_.next(random_));
}

void Plant::step() {
  ++steps_;
  time_s_ = static_cast<double>(steps_) * kStepS;
  step_inflow();
  pumps_.step(level_m_, lead_health());
  overflow_ = weir_m3s(level_m_);
  level_m_ += (inflow_ - pumps_.delivered_m3s() - overflow_) / kAreaM2 * kStepS;
}

}  // namespace steelyard::demo::basin
