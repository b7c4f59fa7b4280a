// SPDX-License-Identifier: Apache-2.0
// What a hypothesis expects a channel to read, before the reading: three scalars and one column.
#pragma once

#include <array>
#include <cmath>

#include "engine/discretise.h"
#include "engine/hypothesis.h"

namespace steelyard::engine {

struct Projection {
  double mean = 0.0;                     ///< of the noiseless reading
  double variance = 0.0;                 ///< s: of the noiseless reading
  double spec_variance = 1.0;            ///< datasheet noise with quantisation: sd² + resolution²/12
  std::array<double, kMaxDim> column{};  ///< covariance of z with the noiseless reading
  CoreVector slope;                      ///< effective row over [states | inputs]; empty for stuck
  std::array<int, 3> ones{-1, -1,
                          -1};  ///< elements of z that are read as they are: bias, correlated noise, own
  /// False where the reading's formula has no finite value at the mean: then nothing is expected.
  [[nodiscard]] bool known() const { return std::isfinite(mean) && std::isfinite(variance); }
  /// Covariance of this noiseless reading with whatever has covariance `with` with z.
  [[nodiscard]] double along(const double* with) const;
};

class Projector {
 public:
  Projector(const Model& model, const Layout& layout) : model_(model), layout_(layout) {}

  /// As if the channel were in `condition` (a walk needs its own numbers in z, stuck as well).
  void project(const Hypothesis& h, int channel, int part, Condition condition, double time_s,
               Projection& out) const;

  /// Datasheet noise variance where the hypothesis believes the machine to be.
  [[nodiscard]] double spec_variance(const Hypothesis& h, int channel, int part, double time_s) const;

 private:
  void regress(const Hypothesis& h, Formula& formula, double modulo, double time_s, Projection& out) const;
  void read_slope(const Hypothesis& h, const ChannelModel& channel, const PartModel& part, double time_s,
                  Projection& out) const;
  [[nodiscard]] double variance_by_time(const Hypothesis& h, double time_s, double time_sd_s,
                                        const Projection& out) const;
  const Model& model_;
  const Layout& layout_;
};

}  // namespace steelyard::engine
