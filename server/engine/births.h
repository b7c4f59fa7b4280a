// SPDX-License-Identifier: Apache-2.0
// New conditions: the heaviest hypotheses bear children in which the channel that reads has changed.
#pragma once

#include <array>
#include <span>

#include "engine/likelihood.h"
#include "engine/motion.h"

namespace steelyard::engine {

/// Channels that one cause may strike together with the channel that reads.
struct Group {
  std::array<bool, kMaxChannels> member{};
  double share = 0.0;         ///< of the faults of the channel that reads that strike all members
  double gap_s = 0.0;         ///< since any member read
  bool freezes_only = false;  ///< channels of one source: what they share is the way, not the place
};
inline constexpr int kMaxGroups = kMaxCommon + 1;

class Births {
 public:
  Births(const Model& model, const Layout& layout, Likelihood& likelihood)
      : model_(model), layout_(layout), likelihood_(likelihood) {}

  /// Appends to `children` what `parent` bears at this reading, weighted with it, from its state before the
  /// reading; children under log_floor are not built. Returns the probability that the channel's condition
  /// stays. last_values: of each part at its last reading.
  double bear(const Hypothesis& parent, const Occasion& occasion, const Walks& walks, double log_floor,
              Pool& children, std::span<const Group> groups = {}, std::span<const double> last_values = {});

  /// The most children that one parent can have at one reading, in a model with so many groups.
  static constexpr int most_children(int groups) { return kConditions + 2 + (kConditions - 1) * groups + 1; }

 private:
  struct Switch {
    Condition to = Condition::kSound;
    double log_weight = 0.0;  ///< parent's weight times the probability of the switch
  };
  [[nodiscard]] double rate(Condition from, Condition to, const ChannelModel& channel) const;
  [[nodiscard]] bool possible(Condition to, const Occasion& occasion) const;
  int switches(const Hypothesis& parent, const Occasion& occasion, double alone_share,
               std::array<Switch, kConditions>& out, double& stays) const;
  void bear_together(const Hypothesis& parent, const Occasion& occasion, const Group& group,
                     const Walks& walks, std::span<const double> last_values, double log_floor,
                     Pool& children);
  void strike(Hypothesis& h, int channel, Condition condition, double time_s, const Walks& walks,
              std::span<const double> last_values);
  void bear_noisy(const Hypothesis& parent, const Occasion& o, const Switch& to, Pool& children);
  bool become(Hypothesis& child, const Occasion& o, Condition to, const Walks& walks);
  bool bear(const Hypothesis& parent, const Occasion& o, const Switch& to, const Walks& walks,
            Pool& children);
  bool become_offset(Hypothesis& child, const Occasion& o, Condition to, const Walks& walks);
  void become_walk(Hypothesis& child, const Occasion& o, Condition to, const Walks& walks);
  void start_rates(Hypothesis& h, int channel, const Walks& walks) const;

  const Model& model_;
  const Layout& layout_;
  Likelihood& likelihood_;
};

/// A walk's Gamma at its birth: the speed of its condition, worth so little that some readings change it.
inline constexpr Gamma kFirstWalk{1.0, 1.0};

}  // namespace steelyard::engine
