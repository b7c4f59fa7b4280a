// SPDX-License-Identifier: Apache-2.0
#include "suite/reference.h"

#include <cmath>

namespace steelyard::suite {
namespace {

struct Filter {
  double x = 0, v = 0, pxx = 1, pxv = 0, pvv = 1;

  void predict(double dt, double unrest) {
    const double q = unrest * unrest;
    x += v * dt;
    pxx += dt * (2 * pxv + dt * pvv) + q * dt * dt * dt / 3;
    pxv += dt * pvv + q * dt * dt / 2;
    pvv += q * dt;
  }
  void update(bool speed, double y, double r) {
    const double s = (speed ? pvv : pxx) + r;
    const double kx = (speed ? pxv : pxx) / s;
    const double kv = (speed ? pvv : pxv) / s;
    const double e = y - (speed ? v : x);
    x += kx * e;
    v += kv * e;
    const double hx = speed ? pxv : pxx;
    const double hv = speed ? pvv : pxv;
    pxx -= kx * hx;
    pxv -= kx * hv;
    pvv -= kv * hv;
  }
};

}  // namespace

Track reference(const Readings& readings, const Row& row, bool told, double unrest) {
  Filter filter;
  Track out;
  for (int i = 0; i < kSteps; ++i) {
    if (i > 0) filter.predict(kStepS, unrest);
    for (int j = 0; j < kChannels; ++j) {
      const auto u = static_cast<std::size_t>(j);
      const double y = readings.value[u][static_cast<std::size_t>(i)];
      if (std::isnan(y)) continue;
      double sd = kSd[u];
      const Fault* f = told ? fault_at(row, j, i) : nullptr;
      if (f && f->kind == Kind::kNoise) {
        sd *= f->size;
      } else if (f && f->kind == Kind::kStrays) {
        if (readings.wild[u][static_cast<std::size_t>(i)]) continue;
      } else if (f) {
        continue;
      }
      filter.update(j == 3, y, sd * sd);
    }
    out.position.push_back(filter.x);
    out.sd.push_back(std::sqrt(filter.pxx));
  }
  return out;
}

double rmse(const std::vector<double>& position, const Truth& truth) {
  double sum = 0.0;
  for (int i = kFirst; i < kSteps; ++i) {
    const auto u = static_cast<std::size_t>(i);
    sum += (position[u] - truth.position[u]) * (position[u] - truth.position[u]);
  }
  return std::sqrt(sum / (kSteps - kFirst));
}

}  // namespace steelyard::suite
