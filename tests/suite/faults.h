// SPDX-License-Identifier: Apache-2.0
// Faults that the suite puts on channels, and the readings that come of them.
#pragma once

#include <array>
#include <limits>
#include <string>
#include <vector>

#include "suite/plant.h"

namespace steelyard::suite {

enum class Kind {
  kNone,
  kFrozen,
  kStuck,
  kOffset,
  kDrift,
  kNoise,
  kStrays,
  kScale,
  kLag,
  kHum,
  kOnOff,
  kGarbage,
  kSilence
};

struct Fault {
  int channel = 0;
  Kind kind = Kind::kNone;
  double size = 0.0;  ///< offset, hum, on-off in sd; drift in sd/s; noise and scale as factors; lag in s
  double from_s = 20.0;
  double to_s = 40.0;
};

struct Row {
  std::string name;
  std::vector<Fault> faults;
  std::array<bool, kChannels> present{true, true, true, true};
  bool noticeable = true;  ///< the faulty channel's trust must be under 0.2 by mid-fault
};

inline constexpr double kNoReading = std::numeric_limits<double>::quiet_NaN();

struct Readings {
  std::array<std::vector<double>, kChannels> value;  ///< kNoReading: nothing came
  std::array<std::vector<bool>, kChannels> wild;     ///< a stray: the reference filter skips it
};

[[nodiscard]] Readings read(const Truth& truth, const Row& row, std::uint64_t seed);
[[nodiscard]] const std::vector<Row>& table();
/// Is the channel faulty at this step?
[[nodiscard]] const Fault* fault_at(const Row& row, int channel, int step);

}  // namespace steelyard::suite
