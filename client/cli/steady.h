// SPDX-License-Identifier: Apache-2.0
// How well some channels know the states in the long run, every one of them sound: the covariance recursion
// of the Kalman filter (Kalman 1960) at the declared periods, over many steps at once by doubling (Anderson
// 1978, International Journal of Control 28:295; Anderson & Moore 1979, Optimal Filtering, section 6.7).
#pragma once

#include <Eigen/Core>
#include <vector>

#include "cli/observe.h"
#include "engine/model.h"

namespace steelyard::client {

/// What one or more steps of prediction and reading do to a covariance P before them: it becomes
/// A (I + P J)⁻¹ P Aᵀ + C.
struct CovarianceStep {
  Eigen::MatrixXd a;
  Eigen::MatrixXd c;
  Eigen::MatrixXd j;
};

/// One prediction (transition F, noise Q), then one reading (H, noise R; no rows: no reading).
[[nodiscard]] CovarianceStep step_of(const Eigen::MatrixXd& transition, const Eigen::MatrixXd& noise,
                                     const Eigen::MatrixXd& reads, const Eigen::MatrixXd& reading_noise);
/// `first`, then `second`.
[[nodiscard]] CovarianceStep together(const CovarianceStep& first, const CovarianceStep& second);
[[nodiscard]] Eigen::MatrixXd after(const CovarianceStep& step, const Eigen::MatrixXd& before);

struct Accuracy {
  std::vector<double> sd;     ///< by state, in its unit; not finite: grows without bound
  std::vector<bool> growing;  ///< by state: it was still growing at the end
};

/// The linearised machine at its usual unrest; inputs count as known, delays and jitter of times as none.
/// Standing biases and correlated noise are states beside the machine's.
class LongRun {
 public:
  static constexpr double kResponses = 1000.0;    ///< how long the run is, in response times
  static constexpr double kUsualReadings = 50.0;  ///< of a channel without a period, in a response time

  LongRun(const engine::Model& model, const Point& point);

  /// At the end of the run, just after these channels have read; before it the states are as at the start.
  [[nodiscard]] Accuracy with(const std::vector<int>& channels) const;

 private:
  [[nodiscard]] double period_s(int channel) const;
  void read(int channel, double spread, Eigen::MatrixXd& reads, Eigen::MatrixXd& noise) const;
  [[nodiscard]] CovarianceStep cycle(const std::vector<int>& channels, double& length_s) const;
  void find_step();
  void move(double dt_s, Eigen::MatrixXd& transition, Eigen::MatrixXd& noise) const;

  // All in units of what stands at the start: start_sd, bias_sd, the noise's sd.
  const engine::Model& model_;
  Eigen::Index states_ = 0;
  Eigen::Index size_ = 0;
  Eigen::MatrixXd rate_;                 // of the states, 1/s
  Eigen::VectorXd density_;              // of the states, 1/s
  Eigen::MatrixXd reads_;                // parts × all, in the channels' units
  std::vector<Eigen::Index> row_of_;     // by channel, its first part's
  double shortest_s_ = 0.0;              // period of any channel
  double step_s_ = 0.0;                  // that all periods are multiples of; 0: there is none
  std::vector<Eigen::Index> colour_at_;  // by channel, of its correlated noise; −1: none
};

}  // namespace steelyard::client
