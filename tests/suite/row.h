// SPDX-License-Identifier: Apache-2.0
// A row of the table: what is done to a machine's channels, what the rig says wrongly or in addition, and
// which bounds hold. A row names its machine's channels by their numbers.
#pragma once

#include <limits>
#include <string>
#include <vector>

namespace steelyard::suite {

/// One sensor signal. `sd` is the true repeatability; a row can declare another one.
struct Channel {
  std::string name{};
  double sd = 1.0;
  double lo = -1.0;  ///< range
  double hi = 1.0;
  double resolution = 0.0;
  double period_s = 0.0;   ///< a multiple of the machine's step
  double damping_s = 0.0;  ///< time constant of first order in the transmitter, behind the noise; sd is what
                           ///< comes out of it
  double deadband = 0.0;   ///< > 0: reports a value only when it has moved by this
  double holds = 0.0;      ///< 1: between two reports the old value is read again; 0: nothing comes
  double time_jitter_s = 0.0;  ///< sd of the error of its time stamps
  double modulo = 0.0;         ///< full turn of an angle
  int parts = 1;               ///< a vector channel reads several numbers at once, all with this sd
  int same_as = -1;            ///< channels with equal number ≥ 0 read the same quantity
  double source = 0.0;         ///< who sends it, a whole number: 0 nobody in particular
};

enum class Kind {
  kNone,
  kFrozen,   ///< the last value repeats
  kStuck,    ///< a level with the sensor's own noise
  kHold,     ///< the last value with ± 2 counts of jitter (an analogue hold behind a converter)
  kOffset,   ///< size in sd
  kDrift,    ///< size in sd per response time
  kNoise,    ///< size: factor
  kStrays,   ///< one reading in ten is wild, within ± size sd
  kScale,    ///< size: factor
  kLag,      ///< first order; size in response times
  kHum,      ///< size in sd; 0.7 periods a response time
  kOnOff,    ///< an offset of size sd that comes and goes every two response times
  kFoam,     ///< rises to size sd with a time constant of two response times
  kGarbage,  ///< uniform over the range
  kSilence
};

inline constexpr double kUsual = std::numeric_limits<double>::quiet_NaN();

struct Fault {
  int channel = 0;
  Kind kind = Kind::kNone;
  double size = 0.0;
  double from_s = kUsual;  ///< usual: the machine's fault window
  double to_s = kUsual;
};

/// What a channel is like in this row throughout: deadband, damping, coarser resolution …
struct Trait {
  int channel = 0;
  double Channel::*field = nullptr;
  double value = 0.0;
};

/// What the rig says, where that differs from the truth or adds to it.
struct Declaration {
  std::vector<double> sd_factors{};  ///< by channel; empty: all 1
  double unrest_factor = 1.0;
  double response_factor = 1.0;
  double fails_every_h = 0.0;  ///< 0: as the run's settings say
  bool on_change = false;      ///< deadbands are declared
  bool correlation = false;    ///< damping is declared, as correlation of successive readings
  bool time_sd = false;        ///< time jitter is declared
  bool sources = false;        ///< readings come with their source
  std::vector<int> common{};   ///< channels whose faults can have one cause (share 0.5)
};

/// Which bounds hold for a row (bounds.h).
enum class Class {
  kHealthy,    ///< nothing is wrong
  kSingle,     ///< one fault
  kPair,       ///< more than one channel at fault
  kCreep,      ///< a drift of at most 0.5 sd per response time
  kWrong,      ///< the rig says something wrong
  kAmbiguous,  ///< information itself is lacking: no bound on the error
};

struct Row {
  std::string name{};
  std::vector<Fault> faults{};
  std::vector<bool> present{};  ///< by channel; empty: all
  bool noticeable = true;       ///< the faulty channels' trust must be under 0.2 by mid-fault
  Class what = Class::kHealthy;
  bool slow_on_best =
      false;             ///< a slow drift of the machine's best channel: the lower bound of coverage is 0.80
  bool at_rest = false;  ///< the machine does not move
  bool at_change = false;  ///< the faults begin at a set-point change
  std::vector<Trait> traits{};
  Declaration declared{};

  [[nodiscard]] bool has(int channel) const {
    return present.empty() || present[static_cast<std::size_t>(channel)];
  }
  [[nodiscard]] bool hurts(int channel) const;  ///< is the channel at fault at some time?
  /// Is the channel worse than the rig says, or otherwise than it says? Then little trust does it no wrong.
  [[nodiscard]] bool misdeclares(int channel) const;
};

}  // namespace steelyard::suite
