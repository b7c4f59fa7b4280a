// SPDX-License-Identifier: Apache-2.0
#include "judges/axis_filter.h"

#include <cmath>
#include <numbers>

#include "judges/axis.h"

namespace steelyard::judges {
namespace {

// White acceleration per √s that fits fault-free runs best (of 0.1 to 0.7, least RMSE of position).
constexpr double kUnrest = 0.25;

}  // namespace

void AxisFilter::predict() {
  constexpr double dt = Axis::kStepS;
  constexpr double q = kUnrest * kUnrest;
  x_ += v_ * dt;
  pxx_ += dt * (2.0 * pxv_ + dt * pvv_) + q * dt * dt * dt / 3.0;
  pxv_ += dt * pvv_ + q * dt * dt / 2.0;
  pvv_ += q * dt;
}

double AxisFilter::update(int channel, double y, double strays) {
  const bool speed = channel == 3;
  const double sd = Axis::kSd[static_cast<std::size_t>(channel)];
  const double s = (speed ? pvv_ : pxx_) + sd * sd;
  const double e = y - (speed ? v_ : x_);
  const double regular = (1.0 - strays) * std::exp(-0.5 * e * e / s) / std::sqrt(2.0 * std::numbers::pi * s);
  const double stray = strays / (2.0 * Axis::kRange[static_cast<std::size_t>(channel)]);
  if (stray > regular) return std::log(stray + regular);
  const double hx = speed ? pxv_ : pxx_;
  const double hv = speed ? pvv_ : pxv_;
  const double pxx = pxx_ - hx * hx / s;
  const double pxv = pxv_ - hx * hv / s;
  pvv_ -= hv * hv / s;
  pxx_ = pxx;
  pxv_ = pxv;
  x_ += hx / s * e;
  v_ += hv / s * e;
  return stray > 0.0 ? std::log(stray + regular) : -0.5 * (std::log(2.0 * std::numbers::pi * s) + e * e / s);
}

}  // namespace steelyard::judges
