// SPDX-License-Identifier: Apache-2.0
// How hypotheses move over a gap: the machine's law, unrest by mode, unknown inputs, walks of offsets.
#pragma once

#include <array>
#include <span>
#include <vector>

#include "engine/discretise.h"
#include "engine/hypothesis.h"

namespace steelyard::engine {

/// What predict() does to any Gaussian with a group's layout, for who must find the way back (settle.h).
struct Trail {
  std::span<Hypothesis> shadows;     ///< moved like the group's members, one for one
  CoreMatrix* transition = nullptr;  ///< multiplied from the left by that of each step
};

/// Values of inputs that are not known at present wander within their range: an Ornstein–Uhlenbeck process
/// (Uhlenbeck & Ornstein 1930) with the uniform's mean and variance and the response time as time constant.
class Motion {
 public:
  Motion(const Model& model, const Layout& layout);

  /// Sets the gap that the next calls of predict() move over. Bit i of unknown_inputs: input i is not known.
  void prepare(TimeNs from_ns, TimeNs to_ns, unsigned unknown_inputs);

  /// Moves hypotheses that differ in their machine modes alone over the prepared gap.
  void predict(std::span<Hypothesis> group, const Walks& walks, const Trail& trail = {});

  [[nodiscard]] bool affine() const { return affine_; }

 private:
  struct Gap {
    TimeNs length_ns = -1;
    unsigned unknown = 0;
    Transition move;
    CoreMatrix input_noise;  ///< of unknown inputs; the mode does not scale it
    bool has_input_noise = false;
  };
  void fill(Gap& gap, const CoreMatrix& rate, const CoreVector& drive, double dt_s) const;
  void rates(const CoreVector& v, double time_s, CoreVector& out) const;
  void linearise(const Hypothesis& h, double time_s, double dt_s);
  void apply(Hypothesis& h, const Gap& gap);
  void move(std::span<Hypothesis> group, const Gap& gap, const Trail& trail);
  void walk(Hypothesis& h, const Walks& walks) const;
  static void fade(Hypothesis& h, int at, double keeps);
  void drift(Hypothesis& h, int at, int rate, double rate_density) const;

  const Model& model_;
  const Layout& layout_;
  bool affine_ = true;
  CoreMatrix rate_;  ///< affine part, inputs held
  CoreVector drive_;
  CoreVector unrest_density_;
  std::array<double, kModes> mode_factor_{};
  TimeNs from_ns_ = 0;
  double gap_s_ = 0.0;
  unsigned unknown_ = 0;
  std::array<double, kMaxChannels> colour_keeps_{};  ///< share of a channel's correlated noise that lasts
  std::array<Gap, 8> cache_;                         ///< of affine gaps, replaced in turn
  int next_in_cache_ = 0;
  const Gap* affine_gap_ = nullptr;
  Gap local_;                 ///< one step of a law that is not affine
  std::vector<double> rows_;  ///< core × max_dim scratch
};

}  // namespace steelyard::engine
