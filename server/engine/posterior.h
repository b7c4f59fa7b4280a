// SPDX-License-Identifier: Apache-2.0
// The engine's inside: hypotheses and what is remembered of each channel and input.
#pragma once

#include <array>
#include <memory>
#include <vector>

#include "engine/births.h"
#include "engine/collect.h"
#include "engine/engine.h"
#include "engine/likelihood.h"
#include "engine/motion.h"
#include "engine/repeats.h"

namespace steelyard::engine {

struct ChannelMemory {
  bool fused_any = false;
  TimeNs fused_at = 0;
  TimeNs judged_at = 0;  ///< when it was last fused, or its silence heeded
  int source = 0;        ///< of the last fused reading
  bool seen_any = false;
  TimeNs seen_at = 0;  ///< of the last usable reading, fused or the same measurement again
  RepeatRate repeats;
  LossRate losses;
  double freedom = 0.0;  ///< degrees of freedom for signal, decaying with the response time
  TimeNs freedom_at = 0;
  std::int64_t out_of_range = 0;
};

/// What is remembered beside the hypotheses and read by reports.
struct Memory {
  std::vector<ChannelMemory> channels;
  std::array<double, kMaxParts> spec_sd{};  ///< datasheet noise sd at the last reading; scales the walks
};

struct InputMemory {
  bool good = true;
  bool expires = false;
  TimeNs good_until = 0;
};

class Settler;
class Trails;

struct Posterior : Memory {
  explicit Posterior(std::shared_ptr<const Model> model, bool with_lineage = false);
  Posterior(const Posterior& other);
  ~Posterior();

  void start(TimeNs t);
  /// Fills `next` with the hypotheses moved from predicted_to to t; `now` stays as it is.
  void predict_next(TimeNs t, Trails* trails = nullptr);
  void advance(TimeNs t);
  void split_modes(double dt_s);
  [[nodiscard]] unsigned unknown_inputs(TimeNs t) const;
  [[nodiscard]] TimeNs next_expiry(TimeNs from, TimeNs to) const;
  void set_input(TimeNs t, int input, double value, bool good);
  void condition_on_input(Hypothesis& h, int at, double value, double variance) const;

  Fate read(TimeNs t, int channel, std::span<const double> values, Quality quality, int source);
  Fate read(TimeNs t, int channel, double value, Quality quality) {
    return read(t, channel, std::span<const double>(&value, 1), quality, 0);
  }
  [[nodiscard]] Occasion occasion(TimeNs t, int channel, std::span<const double> values,
                                  Quality quality) const;
  void censor_by_range(Occasion& o) const;
  [[nodiscard]] Occasion silence_occasion(TimeNs t, int channel) const;
  void heed_silence(TimeNs until);
  [[nodiscard]] TimeNs next_heed(int channel) const;
  [[nodiscard]] bool in_range(int channel, std::span<const double> values) const;
  [[nodiscard]] std::span<const double> last_of(int channel) const;
  void find_groups(const Occasion& o);
  [[nodiscard]] double silent(const ChannelMemory& memory, int channel, TimeNs t) const;
  void fuse(const Occasion& o);
  void forget_noise(const Occasion& o);
  void bear_children(const Occasion& o);
  void absorb_standing(const Occasion& o);
  void settle_frozen(const Occasion& o, double log_average);
  void remember(TimeNs t, const Occasion& o, int source);
  void refresh_walks(const Hypothesis& h, int channel, double time_s);
  [[nodiscard]] double probability(int channel, Condition condition) const;

  std::shared_ptr<const Model> model;
  Layout layout;
  Motion motion;
  Likelihood likelihood;
  Births births;
  Collector collector;
  Pool now;
  Pool next;
  Pool children;
  Walks walks{};
  std::array<double, kMaxParts> last_values{};  ///< of the last fused readings
  std::vector<Group> groups;                    ///< of the channel that reads
  std::vector<InputMemory> inputs;
  std::array<bool, kModes> mode_on{};
  CoreMatrix mode_switch;  ///< P(mode after | mode before) over mode_gap_s
  double mode_gap_s = -1.0;
  std::vector<Absorbed> absorbed;
  bool started = false;
  TimeNs predicted_to = 0;
  TimeNs time = 0;
  double log_evidence = 0.0;
  std::unique_ptr<Settler> settler;  ///< null: nothing is settled; not copied
};

/// What `pool` says of time t, with what was remembered then.
void report(const Posterior& posterior, const Memory& memory, const Pool& pool, TimeNs t, Detail detail,
            Estimate& out);

struct Engine::Impl : Posterior {
  using Posterior::Posterior;
};

}  // namespace steelyard::engine
