// SPDX-License-Identifier: Apache-2.0
// Faults injected into real readings, one of each kind: what the sensor would have shown, from what it did
// show.
#pragma once

#include <string>

#include "judges/random.h"

namespace steelyard::judges {

enum class Kind { kOffset, kDrift, kFreeze, kNoise, kScale };

struct Fault {
  Kind kind = Kind::kOffset;
  double size =
      0.0;  ///< offset in the unit, drift in the unit a day, noise's sd in the unit, scale as a factor
  double days = 1.0;  ///< how long it lasts
  std::string label;  ///< kind and size in words
};

/// One fault's way over the readings of one channel, in order.
class Spoiler {
 public:
  Spoiler(const Fault& fault, double last_before, std::uint64_t seed)
      : fault_(fault), held_(last_before), random_(seed) {}

  /// What is shown in place of `value` when the fault has lasted this long.
  [[nodiscard]] double spoil(double value, double since_days);

 private:
  Fault fault_;
  double held_;
  Random random_;
};

}  // namespace steelyard::judges
