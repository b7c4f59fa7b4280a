// SPDX-License-Identifier: Apache-2.0
// A slow basin: water flows in as a day goes by, with sudden sluices; a pump holds a level that the operator
// changes every so often. Three healthy level gauges and a flow meter, one reading a second each. The pump is
// a known input.
#pragma once

#include <array>
#include <memory>

#include "engine/model.h"
#include "judges/random.h"

namespace steelyard::judges {

class Basin {
 public:
  static constexpr int kChannels = 4;
  static constexpr engine::TimeNs kStepNs = 1'000'000'000;
  static constexpr std::array<const char*, kChannels> kNames{"sonic", "radar", "cell", "meter"};

  explicit Basin(std::uint64_t seed);

  /// Moves the machine on by one second and reads all channels.
  void step();
  [[nodiscard]] double reading(int channel) const { return readings_[static_cast<std::size_t>(channel)]; }
  [[nodiscard]] double pump_m3s() const { return pump_m3s_; }
  [[nodiscard]] double level_m() const { return level_m_; }
  [[nodiscard]] double inflow_m3s() const { return inflow_m3s_; }

 private:
  void flow_in();
  void pump();
  void read();

  Random random_;
  double time_s_ = 0.0;
  double level_m_ = 2.0;
  double inflow_m3s_ = 0.1;
  double wander_m3s_ = 0.0;
  double sluice_m3s_ = 0.0;
  double next_sluice_s_;
  double sluice_closes_s_ = 0.0;
  double pump_m3s_ = 0.1;
  double target_m_ = 2.0;
  double next_target_s_;
  std::array<double, kChannels> bias_{};
  std::array<double, kChannels> readings_{};
};

/// The rig: level and inflow, pump as an input, response 60 s, every default.
[[nodiscard]] std::shared_ptr<engine::Model> basin_model();

}  // namespace steelyard::judges
