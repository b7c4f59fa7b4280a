// SPDX-License-Identifier: Apache-2.0
// The engine's own generative model, run forwards: a machine, its channels' conditions and their readings,
// drawn from the very laws that the engine assumes. The constants that the engine keeps to itself
// (posterior.cc, repeats.h) stand here again, on purpose: where they drift apart, calibration is lost and the
// judge says so.
#pragma once

#include <array>
#include <memory>
#include <vector>

#include "engine/model.h"
#include "judges/random.h"

namespace steelyard::judges {

/// The machine: position and speed (R = 1 s), three position channels and one speed channel. fails_every 200
/// R. Ranges are so wide that the machine, which nothing holds, stays within them.
[[nodiscard]] std::shared_ptr<engine::Model> prior_model();

/// How one channel is at present.
struct ChannelTruth {
  engine::Condition condition = engine::Condition::kSound;
  double noise_sd = 0.0;  ///< resolution included
  double own = 0.0;       ///< offset of the walks, level of stuck
  double rate = 0.0;      ///< of a creeping offset, per s
  double haste = 1.0;     ///< precision of an offset's walk, relative to that of its condition's speed
  double shown = 0.0;     ///< last reading
};

class PriorMachine {
 public:
  PriorMachine(const engine::Model& model, std::uint64_t seed);

  /// Moves everything on by dt (0: the first moment) and draws a reading of every channel.
  void step(double dt_s);
  [[nodiscard]] double state(int i) const { return state_[static_cast<std::size_t>(i)]; }
  [[nodiscard]] const ChannelTruth& channel(int j) const { return channels_[static_cast<std::size_t>(j)]; }
  [[nodiscard]] engine::Mode mode() const { return mode_; }

 private:
  void switch_mode(double dt_s);
  void move(double dt_s);
  void switch_condition(int j, double dt_s);
  void begin(int j, engine::Condition next);
  void walk(int j, double dt_s);
  void read(int j, bool first);
  double draw_noise_sd(int j);
  [[nodiscard]] double rate(engine::Condition from, engine::Condition to, int j) const;
  [[nodiscard]] double spec_sd(int j) const;

  const engine::Model& model_;
  Random random_;
  std::array<double, 2> state_{};
  engine::Mode mode_ = engine::Mode::kUsual;
  std::vector<ChannelTruth> channels_;
};

}  // namespace steelyard::judges
