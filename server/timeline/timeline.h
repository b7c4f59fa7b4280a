// SPDX-License-Identifier: Apache-2.0
// Order: puts readings of several sources in the order of time, recognises what was sent twice, applies
// declared delays, and drives one engine. One thread at a time.
#pragma once

#include <cstdint>
#include <functional>
#include <memory>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "engine/engine.h"
#include "rig/rig.h"
#include "timeline/sequence_set.h"
#include "timeline/values.h"

namespace steelyard::timeline {

/// What one source read at one time. `source` is a number from Timeline::source_number().
struct Reading {
  engine::TimeNs time_ns = 0;
  rig::Signal signal;
  Values values;  ///< one for each part of the channel; an input has one
  engine::Quality quality = engine::Quality::kGood;
  std::uint32_t source = 0;
  std::uint64_t sequence = 0;  ///< rises within a source
};

/// What became of a reading. Everything before kDuplicate counts as taken.
enum class Outcome : std::uint8_t {
  kFused,
  kSameMeasurement,
  kOutOfRange,
  kNotUsable,
  kInput,       ///< taken as an input's value
  kDuplicate,   ///< (source, sequence) was taken before; quietly ignored
  kNotFinite,   ///< refused
  kTooOld,      ///< refused: older than what has been fused (until the timeline can rewind)
  kWrongParts,  ///< refused: not one value for each part of the channel
};

class Timeline {
 public:
  explicit Timeline(std::shared_ptr<const rig::Rig> rig);
  /// A timeline that settles as well: `settled` is called, from within run() and settle_rest(), with the
  /// estimate of each moment from exactly what the rig's lag after it brought.
  Timeline(std::shared_ptr<const rig::Rig> rig, engine::Detail detail,
           std::function<void(const engine::Estimate&)> settled);

  /// Finds or makes the number of a source.
  [[nodiscard]] std::uint32_t source_number(std::string_view name);
  /// Highest sequence taken from a source; 0: none. `source` must come from source_number().
  [[nodiscard]] std::uint64_t position(std::uint32_t source) const;

  /// Called after the last channel reading of each distinct time within one run().
  using OnMoment = std::function<void(engine::TimeNs)>;

  /// Sorts `batch` (time less delay; inputs before channels; bytewise channel name; source name; sequence)
  /// and runs it. outcomes[i] belongs to batch[i] as sorted. Readings within a batch may come in any order.
  void run(std::span<Reading> batch, std::vector<Outcome>& outcomes, const OnMoment& on_moment = {});

  /// The machine now (at the newest reading), or extrapolated to t ≥ clock().
  void estimate(engine::TimeNs t, engine::Detail detail, engine::Estimate& out);

  /// Settles the rest with what there is. Once, after the last run().
  void settle_rest() { engine_.settle_rest(); }

  /// The rig's clock: the newest accepted reading time as stamped. Meaningless while !started().
  [[nodiscard]] engine::TimeNs clock() const;
  [[nodiscard]] bool started() const;
  [[nodiscard]] const rig::Rig& rig() const;
  /// By channel, the source of its last reading that was taken; −1: none yet.
  [[nodiscard]] std::span<const int> last_sources() const { return last_sources_; }
  [[nodiscard]] const engine::Engine& engine() const;

 private:
  struct Source {
    std::string name;
    SequenceSet taken;
  };
  struct Item {
    Reading reading;
    engine::TimeNs moment_ns = 0;  ///< of the machine: the stamp less the channel's delay
    bool duplicate = false;
  };
  [[nodiscard]] bool before(const Item& a, const Item& b) const;
  [[nodiscard]] engine::TimeNs moment_of(const Reading& reading) const;
  [[nodiscard]] std::size_t parts_of(const rig::Signal& signal) const;
  Outcome take(const Item& item);
  Outcome take_channel(const Item& item);

  std::shared_ptr<const rig::Rig> rig_;
  engine::Engine engine_;
  std::vector<int> rank_;  ///< of each channel's name in bytewise order
  std::vector<Source> sources_;
  std::vector<int> last_sources_;
  std::vector<Item> items_;  ///< scratch of run()
  bool started_ = false;
  engine::TimeNs clock_ns_ = 0;
};

}  // namespace steelyard::timeline
