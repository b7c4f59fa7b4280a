// SPDX-License-Identifier: Apache-2.0
// A plain Kalman filter for the axis, written out for two states and independent of the engine.
#pragma once

namespace steelyard::judges {

class AxisFilter {
 public:
  void predict();
  /// Takes a reading of the channel; returns its log density before. `strays`: the share of readings that are
  /// uniform over the range; one that is likelier a stray moves nothing.
  double update(int channel, double y, double strays);

 private:
  double x_ = 0.0;
  double v_ = 0.0;
  double pxx_ = 1.0;
  double pxv_ = 0.0;
  double pvv_ = 1.0;
};

}  // namespace steelyard::judges
