// SPDX-License-Identifier: Apache-2.0
// A positioning axis that runs as long as it is asked to: set-points every 5–11 s that nobody is told, and,
// where wanted, jolts. Four healthy channels at 50 Hz: position a, b, c and speed d. The laws of motion are
// those of the fault suite's axis; the readings are as good as the datasheets say.
#pragma once

#include <array>
#include <memory>

#include "engine/model.h"
#include "judges/random.h"

namespace steelyard::judges {

class Axis {
 public:
  static constexpr int kChannels = 4;
  static constexpr double kStepS = 0.02;
  static constexpr engine::TimeNs kStepNs = 20'000'000;
  static constexpr std::array<double, kChannels> kSd{0.01, 0.03, 0.05, 0.05};
  static constexpr std::array<double, kChannels> kRange{10.0, 10.0, 10.0, 5.0};  // ± this
  static constexpr double kResolution = 1e-4;
  static constexpr std::array<const char*, kChannels> kNames{"a", "b", "c", "d"};

  Axis(std::uint64_t seed, bool jolts);

  /// Moves the machine on by one step and reads all channels.
  void step();
  [[nodiscard]] double reading(int channel) const { return readings_[static_cast<std::size_t>(channel)]; }
  [[nodiscard]] double position() const { return position_; }
  [[nodiscard]] double speed() const { return speed_; }
  [[nodiscard]] static double as_read(int channel, double value);

 private:
  double push();
  double jolt();

  Random random_;
  bool jolts_;
  double time_s_ = 0.0;
  double position_ = 0.0;
  double speed_ = 0.0;
  double target_ = 0.0;
  double next_target_s_;
  double next_jolt_s_;
  double jolt_ends_s_ = 0.0;
  double jolt_push_ = 0.0;
  std::array<double, kChannels> readings_{};
};

/// The rig: position and speed, unrest 0.22, response 1 s, every default.
[[nodiscard]] std::shared_ptr<engine::Model> axis_model();

}  // namespace steelyard::judges
