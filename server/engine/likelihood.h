// SPDX-License-Identifier: Apache-2.0
// What one reading says to one hypothesis: its likelihood, and the update of state and precision.
#pragma once

#include <span>

#include "engine/projection.h"
#include "engine/vector_reading.h"

namespace steelyard::engine {

enum class Censoring : std::uint8_t {
  kNone,
  kBelow,   ///< the true value lies somewhere below `bound`
  kAbove,   ///< above `bound`
  kBetween  ///< between `bound` and `upper`: an on-change source has been quiet
};

/// One reading of one channel, and all about it that is the same for every hypothesis. Where a vector
/// channel's parts have a number each, that of the occasion is their product (densities multiply).
struct Occasion {
  int channel = 0;
  double time_s = 0.0;
  double value = 0.0;
  std::span<const double> values;  ///< of all parts; outlives the occasion
  std::uint32_t loose = 0;         ///< bit i: part i lies at an end of its range and tells next to nothing
  double gap_s = 0.0;              ///< since the channel was last heard or its silence heeded
  double fresh = 1.0;              ///< share of the noise's variance that is new since the last reading
  bool first = false;              ///< the channel's first reading
  bool repeated = false;           ///< exactly the last value
  double last_value = 0.0;
  std::span<const double> last_values;
  Censoring censoring = Censoring::kNone;
  double bound = 0.0;
  double upper = 0.0;
  double regular = 1.0;     ///< P(the reading is no stray), quality included
  double span = 1.0;        ///< of the range
  double resolution = 0.0;  ///< effective, for repeats
  double elsewhere = 0.0;   ///< density (censored: probability) of this reading under a uniform law
  std::array<double, kConditions> walked{};  ///< variance of the walks' own steps over gap_s, first part
};

struct Absorbed {
  double log_likelihood = 0.0;
  double repeat_probability = 0.0;  ///< with which the noise explains a repeat of the last value
  double influence = 0.0;           ///< degrees of freedom for signal that the reading had on the state
};

class Likelihood {
 public:
  Likelihood(const Model& model, const Layout& layout)
      : model_(model), layout_(layout), projector_(model, layout), vector_(model, layout, projector_) {}

  /// Scores the occasion under the hypothesis's condition for the channel (not frozen) and updates it.
  Absorbed absorb(Hypothesis& h, const Occasion& occasion);

  /// Gives a channel without numbers of its own the offset that the reading itself shows, exactly as
  /// uncertain as the reading is, or, where the reading shows no number, one that is as yet unknown. Returns
  /// the log likelihood; NaN where nothing can be expected of the channel.
  double begin_offset(Hypothesis& h, const Occasion& occasion);
  /// The same for a stuck channel: the reading is its level.
  void begin_level(Hypothesis& h, const Occasion& occasion);

  /// The channel's precision is what its datasheet says again.
  void start_noise(Hypothesis& h, int channel) const;
  /// Next to nothing is known of it but the size that it has at present (noise variance by part, over and
  /// above the datasheet's).
  void start_noise(Hypothesis& h, int channel, std::span<const double> variance, double time_s) const;
  /// Relaxes it towards that; keep = 1 leaves it.
  void forget_noise(Hypothesis& h, int channel, double keep) const;

  /// Noise variance r = spec / E[κ] that the hypothesis expects of the channel.
  [[nodiscard]] double noise_variance(const Gamma& g, double spec_variance) const;
  [[nodiscard]] const Projector& projector() const { return projector_; }
  [[nodiscard]] const VectorReading& vector() const { return vector_; }
  [[nodiscard]] double residual(const Occasion& occasion, double expected) const;
  /// Correlated noise of a channel whose readings do not show it: it goes back to what it is at any time.
  void reset_colour(Hypothesis& h, int channel, double time_s) const;

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
  void learn_walk(Hypothesis& h, const Occasion& occasion, const Step& step) const;
  void add_fresh_noise(Hypothesis& h, int channel, double r);
  [[nodiscard]] double repeat_probability(const Occasion& occasion, double noise_variance) const;
  [[nodiscard]] static double log_within(double span, double variance);
  void move(Hypothesis& h, const Step& step);
  [[nodiscard]] double influence(const Step& step) const;

  const Model& model_;
  const Layout& layout_;
  Projector projector_;
  Projection expected_;
  VectorReading vector_;
};

}  // namespace steelyard::engine
