// SPDX-License-Identifier: Apache-2.0
// What one reading says to one hypothesis: its likelihood, and the update of state and precision.
#pragma once

#include "engine/projection.h"

namespace steelyard::engine {

enum class Censoring : std::uint8_t { kNone, kBelow, kAbove };

/// One reading of one channel, and all about it that is the same for every hypothesis.
struct Occasion {
  int channel = 0;
  double time_s = 0.0;
  double value = 0.0;
  double gap_s = 0.0;     ///< since the channel's last fused reading
  bool first = false;     ///< the channel's first reading
  bool repeated = false;  ///< exactly the last value
  double last_value = 0.0;
  Censoring censoring = Censoring::kNone;
  double bound = 0.0;       ///< where censoring starts
  double regular = 1.0;     ///< P(the reading is no stray), quality included
  double span = 1.0;        ///< of the range
  double resolution = 0.0;  ///< effective, for repeats
  double elsewhere = 0.0;   ///< density (censored: probability) of this reading under a uniform law
};

struct Absorbed {
  double log_likelihood = 0.0;
  double repeat_probability = 0.0;  ///< with which the noise explains a repeat of the last value
  double influence = 0.0;           ///< degrees of freedom for signal that the reading had on the state
};

class Likelihood {
 public:
  Likelihood(const Model& model, const Layout& layout)
      : model_(model), layout_(layout), projector_(model, layout) {}

  /// Scores the occasion under the hypothesis's condition for the channel (not frozen) and updates it.
  Absorbed absorb(Hypothesis& h, const Occasion& occasion);

  /// Noise variance r = spec / E[κ] that the hypothesis expects of the channel.
  [[nodiscard]] double noise_variance(const Gamma& g, double spec_variance) const;
  [[nodiscard]] const Projector& projector() const { return projector_; }
  [[nodiscard]] double residual(const Occasion& occasion, double expected) const;

 private:
  struct Step {  ///< the reading's normal component moves the mean by shift·column/S and takes `shrink`·S off
    double weight = 1.0;
    double shift = 0.0;
    double shrink = 1.0;
    double total_variance = 1.0;
  };
  double log_regular(double e, const Gamma& g, double total_variance, double resolution) const;
  template <typename SecondMoment>
  double learn(Gamma& g, double s, double r, double spec, double weight,
               const SecondMoment& second_moment) const;
  Absorbed absorb_censored(Hypothesis& h, const Occasion& occasion, double r);
  [[nodiscard]] double repeat_probability(const Occasion& occasion, double noise_variance) const;
  [[nodiscard]] static double log_within(double span, double variance);
  void move(Hypothesis& h, const Step& step);
  [[nodiscard]] double influence(const Step& step) const;

  const Model& model_;
  const Layout& layout_;
  Projector projector_;
  Projection expected_;
};

}  // namespace steelyard::engine
