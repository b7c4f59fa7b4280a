// SPDX-License-Identifier: Apache-2.0
// What a machine is, as the engine sees it: states that move, inputs that are known commands, channels that
// read them. Plain data, filled by server/rig and checked there; the engine trusts it (see Model::problem).
#pragma once

#include <array>
#include <cstdint>
#include <memory>
#include <optional>
#include <span>
#include <string>
#include <variant>
#include <vector>

namespace steelyard::engine {

/// Nanoseconds since 1970-01-01T00:00:00Z.
using TimeNs = std::int64_t;

inline constexpr int kMaxStates = 16;
inline constexpr int kMaxInputs = 8;
inline constexpr int kMaxChannels = 32;
inline constexpr int kMaxCommon = 8;
inline constexpr int kMaxParts = 32;  ///< of all channels together; a scalar channel is one

/// How a channel's reading relates to the machine. "silent" is reported beside these, see ChannelEstimate.
enum class Condition : std::uint8_t { kSound, kCreeping, kOffset, kWandering, kStuck, kFrozen };
inline constexpr int kConditions = 6;

/// How much unknown disturbance the machine is under at present.
enum class Mode : std::uint8_t { kResting, kStill, kUsual, kJolted };
inline constexpr int kModes = 4;

/// What the source says of its own reading. Only good and uncertain readings are fused.
enum class Quality : std::uint8_t { kGood, kUncertain, kBad, kOutOfService, kSimulated };

/// A scalar function of the machine. One engine's formulas are evaluated by one thread at a time; evaluate()
/// may use buffers of its own, but must be a pure function of its arguments and must not allocate once warm.
class Formula {
 public:
  virtual ~Formula() = default;
  /// states and inputs in the model's order and units; time in seconds since 1970-01-01T00:00:00Z.
  virtual double evaluate(std::span<const double> states, std::span<const double> inputs, double time_s) = 0;
};

/// on_states · x + on_inputs · u + constant. The vectors have the model's numbers of states and of inputs.
struct AffineForm {
  std::vector<double> on_states;
  std::vector<double> on_inputs;
  double constant = 0.0;
};

/// Exactly affine laws run by exact discretisation, all others by sigma points.
using Law = std::variant<AffineForm, std::shared_ptr<Formula>>;

/// The law's value; states and inputs as for Formula::evaluate.
[[nodiscard]] double law_value(const Law& law, std::span<const double> states, std::span<const double> inputs,
                               double time_s);

struct StateModel {
  std::string name;
  std::string unit;
  double start = 0.0;           ///< mean before the first reading
  double start_sd = 1.0;        ///< > 0
  double unrest = 0.0;          ///< ≥ 0: white-noise density that drives the derivative, unit per √s
  std::optional<double> needs;  ///< error that the user can bear, in the state's unit
  Law rate;                     ///< time derivative, unit per s
};

struct InputModel {
  std::string name;
  std::string unit;
  double start = 0.0;     ///< value in force before the first reading
  double sd = 0.0;        ///< ≥ 0: standard uncertainty of a good reading
  double period_s = 0.0;  ///< a good value holds this long, then becomes unknown; 0: until its next value
  double lo = 0.0;        ///< range; an unknown input lies in it
  double hi = 0.0;
};

/// One number of what a channel reads.
struct PartModel {
  std::string unit;
  Law reads;
  double sd = 1.0;                      ///< > 0: repeatability, used when sd_formula is empty
  std::shared_ptr<Formula> sd_formula;  ///< repeatability as a function of the machine, or empty
  double bias_sd = 0.0;                 ///< ≥ 0: standing calibration and mounting uncertainty
  double lo = 0.0;                      ///< range
  double hi = 0.0;
  double resolution = 0.0;   ///< step of the reading; 0: not declared (sd/100 where one is needed)
  double offset_size = 1.0;  ///< B: size that offsets can have
};

/// A channel that sends only when its value has moved by `deadband`, or when `heartbeat_s` has passed.
struct OnChange {
  double deadband = 0.0;     ///< > 0
  double heartbeat_s = 0.0;  ///< 0: it may be quiet for ever
};

/// A scalar channel is one part; a vector channel has further ones, read at once and with one condition.
struct ChannelModel : PartModel {
  std::string name;
  std::vector<PartModel> others;         ///< parts after the first; empty: a scalar channel
  std::vector<double> part_correlation;  ///< of the noise of parts (1,2), (1,3) … (2,3) …; empty: none
  std::optional<double> cutoff;          ///< readings below are censored: the true value lies somewhere below
  double modulo = 0.0;                   ///< full turn of an angle; 0: not an angle (scalar channels)
  double correlation = 0.0;              ///< of the noise of readings one period apart, in [0, 1) (scalar)
  std::optional<OnChange> on_change;     ///< silence says that the value has not moved (scalar)
  double time_sd_s = 0.0;                ///< ≥ 0: uncertainty of the time stamps
  double period_s = 0.0;                 ///< time between two measurements; 0: not declared
  double delay_s = 0.0;          ///< a reading stamped t tells of t − delay_s; the timeline applies it
  double uncertain_ratio = 0.5;  ///< P(regular) given quality `uncertain`; the rest is uniform
  double fails_every_s = 30 * 86400.0;
  double recovers_in_s = 1000.0;
  double changes_in_s = 10.0;  ///< mean time to each other unsound condition
  double memory_s = 5.0;       ///< half-life of what was learned about the noise
  double strays = 0.001;       ///< probability that a reading is a wild value
  bool live_zero = false;  ///< 4-20 mA: the timeline decodes NAMUR NE 43 failure signals (limits from memory)
  double prior_readings = 24.0;  ///< 2·a0: how many readings the datasheet's sd is worth

  [[nodiscard]] int parts() const { return 1 + static_cast<int>(others.size()); }
  [[nodiscard]] const PartModel& part(int i) const {
    return i == 0 ? *this : others[static_cast<std::size_t>(i - 1)];
  }
};

/// Correlation of the noise of two readings that are gap_s apart (first-order autoregressive); 0: none.
[[nodiscard]] double correlation_over(const ChannelModel& channel, double gap_s);

/// Channels whose faults may have one cause: the share β of a channel's faults strikes all of them together
/// (the beta factor of IEC 61508-6).
struct CommonCause {
  std::vector<int> channels;
  double share = 0.1;
};

/// A machine mode beside the usual one: entered every `every_s`, left after `last_s`, unrest × `times`. A
/// still machine comes to rest as a usual one comes to be still: at the same rates, unrest × `times`² in all.
struct ModeModel {
  bool on = true;
  double every_s = 20.0;
  double last_s = 1.5;
  double times = 4.5;
};

/// Parts of the method that tests switch off to compare with models that lack them, and compute budgets.
struct Options {
  int max_hypotheses = 60;  ///< K: kept after each reading; 2K while modes split
  int parents = 8;          ///< hypotheses that bear new conditions at a reading
  double weight_floor = 1e-20;
  bool learn_precision =
      true;  ///< false: every channel keeps its datasheet precision, Student-t becomes normal
  bool cap_precision = true;  ///< false: a channel may be learned to be better than its datasheet
  bool forget = true;         ///< false: memory is infinite
  bool learn_walk = true;     ///< false: offsets walk at the fixed speeds of their conditions
  bool born_faulty = true;    ///< false: every channel is sound at its first reading
  bool use_repeats = true;    ///< false: exact repeats are not evidence
  std::array<bool, kConditions> conditions{true, true, true, true, true, true};
};

struct Model {
  std::vector<StateModel> states;
  std::vector<InputModel> inputs;
  std::vector<ChannelModel> channels;
  std::vector<CommonCause> common;
  double freeze_share = 0.1;  ///< share of freezes that strike all channels of one source together
  double response_s = 1.0;    ///< R: time in which the machine can move noticeably
  ModeModel jolt;
  ModeModel still{true, 20.0, 10.0, 0.15};
  Options options;

  /// Why the engine cannot run this model (sizes beyond the bounds, a value out of its range); empty: it can.
  [[nodiscard]] std::string problem() const;
};

/// Sets every rate, memory and walk of `channel` and the modes to the defaults of a rig with response time R.
void set_defaults(Model& model, double response_s);
void set_defaults(ChannelModel& channel, double response_s);

}  // namespace steelyard::engine
