// SPDX-License-Identifier: Apache-2.0
// The storm-water basin itself: rain → inflow → level → pumps and weir. Integrated at a step of 0.1 s, which
// is 1/80 of the shortest ramp. No sensor is in here: the pumps start and stop by float switches of their
// own.
#pragma once

#include <array>

#include "random.h"

namespace steelyard::demo::basin {

inline constexpr double kStepS = 0.1;
inline constexpr double kAreaM2 = 120.0;
inline constexpr double kCrestM = 4.2;
inline constexpr double kWeirLengthM = 4.0;
inline constexpr double kPumpM3S = 0.060;  ///< one pump at a level of 2 m

/// Where the plant's own trouble lies in time, seconds after the log's start.
struct Upsets {
  double storm_at = 0.0;
  double rag_from = 0.0;     ///< a rag grows into pump 1 …
  double rag_full = 0.0;     ///< … and takes rag_share of its flow …
  double rag_cleared = 0.0;  ///< … until somebody reverses the pump
  double rag_share = 0.0;
};

/// Two pumps in lead and assist. What the controller knows is run feedback times the pump curve.
class Pumps {
 public:
  void step(double level_m, double lead_health);
  [[nodiscard]] double reported_m3s() const { return reported_; }
  [[nodiscard]] double delivered_m3s() const { return delivered_; }
  [[nodiscard]] bool wanted(int pump) const { return wanted_.at(static_cast<std::size_t>(pump)); }

 private:
  std::array<bool, 2> wanted_{};
  std::array<double, 2> running_{};  ///< 0 to 1
  double reported_ = 0.0;
  double delivered_ = 0.0;
};

class Plant {
 public:
  Plant(std::uint64_t seed, const Upsets& upsets, double start_level_m);
  void step();

  [[nodiscard]] double time_s() const { return time_s_; }
  [[nodiscard]] double level_m() const { return level_m_; }
  [[nodiscard]] double inflow_m3s() const { return inflow_; }
  [[nodiscard]] double overflow_m3s() const { return overflow_; }
  [[nodiscard]] double turbulence() const;  ///< 0 in dry weather, 1 in a storm
  [[nodiscard]] const Pumps& pumps() const { return pumps_; }

 private:
  [[nodiscard]] double lead_health() const;
  void step_inflow();

  Upsets upsets_;
  Random random_;
  Wander gusts_;
  Pumps pumps_;
  std::array<double, 2> quick_{};  ///< roofs and streets: two reservoirs in a row, m3/s
  double slow_ = 0.0;              ///< long sewers: one reservoir, m3/s
  long steps_ = 0;
  double time_s_ = 0.0;
  double level_m_;
  double inflow_ = 0.0;
  double overflow_ = 0.0;
};

}  // namespace steelyard::demo::basin
