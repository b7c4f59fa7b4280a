// SPDX-License-Identifier: Apache-2.0
// The basin's transmitters: damping, noise that grows with turbulence, standing error, rounding, and the
// faults of basin_faults.h. read() is called once for each measurement and gives counts: mm for levels, 0.1
// L/s for flow.
#pragma once

#include <cstdint>

#include "basin_plant.h"

namespace steelyard::demo::basin {

inline constexpr int kLevelDecimals = 3;
inline constexpr int kFlowDecimals = 4;

/// Sound from above, unfiltered. Sees foam.
class Sonic {
 public:
  explicit Sonic(std::uint64_t seed) : random_(seed, 1) {}
  std::int64_t read(const Plant& plant);

 private:
  double foam_m(double time_s);
  Random random_;
  bool on_foam_ = false;
  std::int64_t shown_ = 0;
};

/// Radar from above, damped over 5 s.
class Radar {
 public:
  explicit Radar(std::uint64_t seed) : random_(seed, 2) {}
  std::int64_t read(const Plant& plant);

 private:
  Random random_;
  bool started_ = false;
  double damped_m_ = 0.0;
  std::int64_t shown_ = 0;
};

/// Pressure cell 0.15 m above the floor, vented through its cable.
class Cell {
 public:
  explicit Cell(std::uint64_t seed) : random_(seed, 3) {}
  std::int64_t read(const Plant& plant);

 private:
  Random random_;
};

/// Flow meter in the inlet channel, exactly 0 below 5 L/s.
class Meter {
 public:
  explicit Meter(std::uint64_t seed) : random_(seed, 4) {}
  std::int64_t read(const Plant& plant);

 private:
  Random random_;
};

}  // namespace steelyard::demo::basin
