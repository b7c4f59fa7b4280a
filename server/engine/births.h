// SPDX-License-Identifier: Apache-2.0
// New conditions: the heaviest hypotheses bear children in which the channel that reads has changed.
#pragma once

#include <array>

#include "engine/likelihood.h"
#include "engine/motion.h"

namespace steelyard::engine {

class Births {
 public:
  Births(const Model& model, const Layout& layout, Likelihood& likelihood)
      : model_(model), layout_(layout), likelihood_(likelihood) {}

  /// Appends to `children` what `parent` bears at this reading, weighted with it, from its state before the
  /// reading; children under log_floor are not built. Returns the probability that the channel's condition
  /// stays.
  double bear(const Hypothesis& parent, const Occasion& occasion, const Walks& walks, double log_floor,
              Pool& children);

  /// The most children that one parent can have at one reading.
  static constexpr int kMostChildren = kConditions + 1;

 private:
  struct Switch {
    Condition to = Condition::kSound;
    double log_weight = 0.0;  ///< parent's weight times the probability of the switch
  };
  [[nodiscard]] double rate(Condition from, Condition to, const ChannelModel& channel) const;
  int switches(const Hypothesis& parent, const Occasion& occasion, std::array<Switch, kConditions>& out,
               double& stays) const;
  void bear_offset(const Hypothesis& parent, const Occasion& o, const Switch& to, const Walks& walks,
                   Pool& children);
  void bear_walk(const Hypothesis& parent, const Occasion& o, const Switch& to, const Walks& walks,
                 Pool& children);
  void bear_stuck(const Hypothesis& parent, const Occasion& o, const Switch& to, Pool& children) const;
  void bear_frozen(const Hypothesis& parent, const Occasion& o, const Switch& to, Pool& children) const;
  void bear_sound(const Hypothesis& parent, const Occasion& o, const Switch& to, Pool& children);
  Hypothesis& child_of(const Hypothesis& parent, const Occasion& o, const Switch& to, Pool& children) const;
  void start_noise(Hypothesis& h, int channel) const;

  const Model& model_;
  const Layout& layout_;
  Likelihood& likelihood_;
  Projection expected_;
};

}  // namespace steelyard::engine
