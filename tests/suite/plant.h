// SPDX-License-Identifier: Apache-2.0
// The suite's machine: a positioning axis with position and speed, read at 50 Hz by three position sensors
// and one speed sensor, moved to new set-points that no filter is told.
#pragma once

#include <array>
#include <cstdint>
#include <random>
#include <vector>

namespace steelyard::suite {

inline constexpr int kChannels = 4;
inline constexpr int kSteps = 3000;
inline constexpr double kStepS = 0.02;
inline constexpr std::array<double, kChannels> kSd{0.01, 0.03, 0.05, 0.05};
inline constexpr std::array<double, kChannels> kRange{10.0, 10.0, 10.0, 5.0};  // ± this
inline constexpr double kResolution = 1e-4;
inline constexpr std::array<const char*, kChannels> kNames{"a", "b", "c", "d"};

/// The same numbers on every platform: the standard fixes the engine but not the distributions.
class Random {
 public:
  explicit Random(std::uint64_t seed) : engine_(seed) {}
  double uniform();  ///< in [0, 1)
  double between(double lo, double hi) { return lo + (hi - lo) * uniform(); }
  double normal();  ///< by Box & Muller (1958)

 private:
  std::mt19937_64 engine_;
};

struct Truth {
  std::vector<double> position;
  std::vector<double> speed;
  [[nodiscard]] double of(int channel, int step) const {
    return (channel == 3 ? speed : position)[static_cast<std::size_t>(step)];
  }
};

/// Set-points every 5–11 s within ±3, reached with at most 1.2 of acceleration, a little wind besides.
[[nodiscard]] Truth simulate(std::uint64_t seed);

}  // namespace steelyard::suite
