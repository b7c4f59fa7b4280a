// SPDX-License-Identifier: Apache-2.0
// The posterior of one machine: a set of hypotheses over its state, its channels' precisions and conditions.
// See engine.md in this folder for the method. Pure: no I/O, no clock, no threads; after construction and the
// first readings no allocation per reading. An engine is a value: a copy is a snapshot, and the same calls on
// equal engines give equal bits. One engine (and its model's formulas) is used by one thread at a time.
//
//   Engine engine(model);                     // throws std::invalid_argument if model->problem() is not
//   empty engine.set_input(t, 0, 0.06, true); engine.read(t, 1, 2.034, Quality::kGood); engine.estimate(t,
//   Detail::kFull, estimate);
#pragma once

#include <cstdint>
#include <functional>
#include <memory>
#include <span>
#include <vector>

#include "engine/estimate.h"
#include "engine/model.h"

namespace steelyard::engine {

/// What became of a reading.
enum class Fate : std::uint8_t {
  kFused,
  kSameMeasurement,  ///< repeats the last value sooner than the channel's period: no new information
  kOutOfRange,       ///< outside the declared range: counted, not fused
  kNotUsable,        ///< quality bad, out of service or simulated
};

/// kBrief leaves out what costs most: intervals, peaks, explanations.
enum class Detail : std::uint8_t { kBrief, kFull };

/// Asks for settled estimates: of each time at which a channel was read, from exactly the readings and inputs
/// up to lag_ns later. They cost memory and time that live estimates alone do not.
struct Settling {
  TimeNs lag_ns = 0;  ///< ≥ 0
  Detail detail = Detail::kBrief;
  std::function<void(const Estimate&)> settled;  ///< called from within set_input(), read() and settle_rest()
  double negligible =
      3e-7;               ///< pairs of hypotheses with less of the weight give no moments: a compute budget
  int max_slices = 4096;  ///< distinct times within a lag; beyond, the oldest is settled early
  std::size_t max_bytes = std::size_t{256} << 20U;  ///< of all slices together; likewise
};

class Engine {
 public:
  explicit Engine(std::shared_ptr<const Model> model);
  /// An engine that settles as well. Only this one does: a copy of it goes on without.
  Engine(std::shared_ptr<const Model> model, Settling settling);
  Engine(const Engine& other);
  Engine& operator=(const Engine& other);
  Engine(Engine&&) noexcept;
  Engine& operator=(Engine&&) noexcept;
  ~Engine();

  /// Times must not fall; values must be finite (both are the caller's to check). A value that is not good
  /// makes the input unknown within its range from t on.
  void set_input(TimeNs t, int input, double value, bool good);
  /// `values` has one value for each part of the channel. `source` says who sent it: channels that last came
  /// from one source can freeze together.
  Fate read(TimeNs t, int channel, std::span<const double> values, Quality quality, int source = 0);
  Fate read(TimeNs t, int channel, double value, Quality quality) {
    return read(t, channel, std::span<const double>(&value, 1), quality);
  }

  /// The posterior at t ≥ time(), extrapolated without changing this engine's posterior (scratch storage is
  /// used, hence not const). Reuses the storage of `out`.
  void estimate(TimeNs t, Detail detail, Estimate& out);

  /// Settles all that is left with the readings there are. To be called once, after the last reading.
  void settle_rest();
  /// Estimates that were settled early because of a limit.
  [[nodiscard]] std::int64_t settled_early() const;

  [[nodiscard]] TimeNs time() const;  ///< of the newest reading or input; meaningless while !started()
  [[nodiscard]] bool started() const;
  [[nodiscard]] double log_evidence() const;  ///< Σ log p(reading | past) over fused readings
  [[nodiscard]] const Model& model() const;

 private:
  struct Impl;
  std::unique_ptr<Impl> impl_;
};

}  // namespace steelyard::engine
