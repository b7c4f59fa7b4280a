// SPDX-License-Identifier: Apache-2.0
// The readings that come of a machine's truth and a row's faults.
#pragma once

#include <cstdint>
#include <limits>
#include <vector>

#include "suite/machine.h"

namespace steelyard::suite {

inline constexpr double kNoReading = std::numeric_limits<double>::quiet_NaN();

/// What a reading really is. Only the told and the informed filter may know.
enum class Note : std::uint8_t {
  kNone,   ///< nothing was measured and nothing came
  kFresh,  ///< a measurement, be it a faulty one
  kWild,   ///< a stray
  kHeld,   ///< an old value read again
  kQuiet   ///< measured but not sent: the value has moved by less than the deadband
};

struct Readings {
  std::vector<std::vector<double>> value;  ///< by part and step; kNoReading: nothing came
  std::vector<std::vector<Note>> note;     ///< by channel and step
};

/// The row with its faults' times filled in, moved to a set-point change where the row says so.
[[nodiscard]] Row resolved(const Machine& machine, const Row& row, const Truth& truth);

/// `row` must be resolved. Equal arguments give equal readings.
[[nodiscard]] Readings read(const Machine& machine, const Truth& truth, const Row& row, std::uint64_t seed);

/// The fault of a resolved row under which the channel is at this time, or null.
[[nodiscard]] const Fault* fault_at(const Row& row, int channel, double t_s);

/// How a fault's part of a reading goes with time, for a size of one: an offset is 1, a drift the time since
/// its beginning (in response times) …; 0 for kinds that add nothing to a reading.
[[nodiscard]] double shape(const Fault& fault, double response_s, double t_s);
/// Does the fault add size · shape · sd to the reading?
[[nodiscard]] bool adds(Kind kind);

}  // namespace steelyard::suite
