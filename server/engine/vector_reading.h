// SPDX-License-Identifier: Apache-2.0
// What one reading of a vector channel says to one hypothesis: the steps of likelihood.h with matrices of the
// channel's size, and a Wishart distribution in the Gamma's place.
//
// The precision is kept relative to the datasheet's. With the datasheet's noise covariance Σ = L·Lᵀ the
// precision is L⁻ᵀ·K·L⁻¹, K ~ Wishart with ν degrees of freedom and mean M; the prior's mean is the identity.
// A hypothesis holds ν = 2·noise[j].a and M (Hypothesis::shape). In any one direction K is Gamma(ν/2); that
// of the noise's variance has shape (ν − d + 1)/2 (Gelman et al. 2013, ch. 3.6), which for one part is the
// scalar channel's.
#pragma once

#include <Eigen/Dense>
#include <array>
#include <span>

#include "engine/projection.h"

namespace steelyard::engine {

struct Occasion;
struct Absorbed;

using PartsMatrix =
    Eigen::Matrix<double, Eigen::Dynamic, Eigen::Dynamic, Eigen::ColMajor, kMaxParts, kMaxParts>;
using PartsVector = Eigen::Matrix<double, Eigen::Dynamic, 1, Eigen::ColMajor, kMaxParts, 1>;

/// Correlation matrix of the noise of a channel's parts.
[[nodiscard]] Eigen::MatrixXd part_correlations(const ChannelModel& channel);

/// Prior Wishart's ν/2 of a vector channel (for a scalar channel: the Gamma's shape).
[[nodiscard]] double prior_shape(const ChannelModel& channel);

class VectorReading {
 public:
  VectorReading(const Model& model, const Layout& layout, const Projector& projector);

  Absorbed absorb(Hypothesis& h, const Occasion& occasion);
  double begin_offset(Hypothesis& h, const Occasion& occasion);
  void begin_level(Hypothesis& h, const Occasion& occasion);

  /// Relaxes the channel's Wishart towards its prior; keep = 1 leaves it.
  void forget(Hypothesis& h, int channel, double keep) const;
  void start_noise(Hypothesis& h, int channel) const;
  void start_noise(Hypothesis& h, int channel, double shape, std::span<const double> variance,
                   double time_s) const;

  /// E[min(κ, 1)] in the direction in which the channel is worst, its Wishart being ν/2 = a and `mean`.
  [[nodiscard]] static double level(double a, const PartsMatrix& mean);
  /// Noise variance of each part over that of its datasheet, before the cap.
  void relative_variance(int channel, double a, const PartsMatrix& mean, PartsVector& out) const;

 private:
  [[nodiscard]] const ChannelModel& channel(int j) const {
    return model_.channels[static_cast<std::size_t>(j)];
  }
  [[nodiscard]] PartsMatrix mean_precision(const Hypothesis& h, int channel) const;
  [[nodiscard]] static PartsMatrix relative_noise(const PartsMatrix& mean, double a, bool capped);
  [[nodiscard]] PartsMatrix expected_noise(const Hypothesis& h, int channel) const;
  [[nodiscard]] PartsMatrix noise(const PartsMatrix& relative) const;
  void expect(const Hypothesis& h, const Occasion& occasion, Condition condition);
  [[nodiscard]] bool known() const;
  [[nodiscard]] double log_regular(double a, const PartsMatrix& total) const;
  [[nodiscard]] double repeat_probability(const Occasion& occasion, const PartsMatrix& total) const;
  PartsMatrix learn(Hypothesis& h, const Occasion& occasion, PartsMatrix noise, double weight) const;
  double move(Hypothesis& h, const PartsMatrix& total, double weight);

  const Model& model_;
  const Layout& layout_;
  const Projector& projector_;
  std::array<PartsMatrix, kMaxChannels> correlation_root_;  ///< of vector channels
  std::array<Projection, kMaxParts> expected_;
  int parts_ = 0;
  PartsVector innovation_;
  PartsMatrix spread_;     ///< covariance of the noiseless reading
  PartsMatrix spec_root_;  ///< L
};

}  // namespace steelyard::engine
