// SPDX-License-Identifier: Apache-2.0
// How a hypothesis moves over a gap: the machine's law, unrest by mode, unknown inputs, walks of offsets.
#pragma once

#include <array>
#include <vector>

#include "engine/discretise.h"
#include "engine/hypothesis.h"

namespace steelyard::engine {

/// Values of the inputs that are not known at present wander within their range: an Ornstein–Uhlenbeck
/// process (Uhlenbeck & Ornstein 1930) with the uniform's mean and variance and the response time as time
/// constant.
class Motion {
 public:
  Motion(const Model& model, const Layout& layout);

  /// Sets the gap that the next calls of predict() move over. Bit i of unknown_inputs: input i is not known.
  void prepare(TimeNs from_ns, TimeNs to_ns, unsigned unknown_inputs);

  /// Moves one hypothesis over the prepared gap. walk_density[c][j]: spectral density of channel j's own
  /// number under condition c, unit²/s.
  using WalkDensity = std::array<std::array<double, kMaxChannels>, kConditions>;
  void predict(Hypothesis& h, const WalkDensity& walk_density);

  [[nodiscard]] bool affine() const { return affine_; }
  [[nodiscard]] double gap_s() const { return gap_s_; }

 private:
  struct Gap {
    TimeNs length_ns = -1;
    unsigned unknown = 0;
    Transition move;
    CoreMatrix input_noise;  ///< of unknown inputs; not scaled by the mode
    bool has_input_noise = false;
  };
  void fill(Gap& gap, const CoreMatrix& rate, const CoreVector& drive, double dt_s) const;
  const Gap& affine_gap();
  void rates(const CoreVector& v, double time_s, CoreVector& out) const;
  void jacobian(const CoreVector& v, double time_s, CoreMatrix& out) const;
  void flow(CoreVector& v) const;
  void nonlinear_gap(const Hypothesis& h, double mode_factor);
  void long_gap(const CoreVector& mean, double mode_factor);
  void apply(Hypothesis& h, const Gap& gap, double mode_factor);

  const Model& model_;
  const Layout& layout_;
  bool affine_ = true;
  CoreMatrix rate_;  ///< affine part, inputs held
  CoreVector drive_;
  CoreVector unrest_density_;
  std::array<double, kModes> mode_factor_{};
  TimeNs from_ns_ = 0;
  double gap_s_ = 0.0;
  TimeNs gap_ns_ = 0;
  unsigned unknown_ = 0;
  std::array<Gap, 8> cache_;  ///< of affine gaps, replaced in turn
  int next_in_cache_ = 0;
  Gap own_;  ///< of one hypothesis (nonlinear laws)
  CoreVector moved_mean_;
  std::vector<double> rows_;  ///< core × max_dim scratch
};

}  // namespace steelyard::engine
