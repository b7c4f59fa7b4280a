// SPDX-License-Identifier: Apache-2.0
// Discretisation by series and doubling. Checked in tests/outside against published closed forms and the
// block-exponential method, in tests/engine against many small steps.
#include "engine/discretise.h"

#include <cmath>

namespace steelyard::engine {
namespace {

// Terms after which the rest is below the rounding of the sum: the k-th is at most (2x)^k/(k+1)!, x = ‖M‖·h ≤
// ½.
int terms_needed(double x) {
  int k = 0;
  for (double bound = 1.0; bound > 1e-18; ++k) bound *= 2.0 * x / (k + 2);
  return k;
}

// One step of length h with ‖M‖·h ≤ ½. Q solves Q' = MQ + QMᵀ + D, so its Taylor terms are
// h^(k+1)/(k+1)! · R_k with R_0 = D, R_(k+1) = M R_k + R_k Mᵀ.
void short_step(const LinearSystem& s, double h, int terms, Transition& out) {
  const auto n = s.rate.rows();
  CoreMatrix power = CoreMatrix::Identity(n, n);
  CoreVector drive = s.drive;
  CoreMatrix lyapunov = s.density.asDiagonal();
  CoreMatrix product(n, n);
  out.transition = power;
  out.shift = drive * h;
  out.noise = lyapunov * h;
  double factor = 1.0;
  for (int k = 1; k <= terms; ++k) {
    factor *= h / k;
    product.noalias() = s.rate.lazyProduct(power);
    power = product;
    out.transition += power * factor;
    drive = CoreVector(s.rate.lazyProduct(drive));
    out.shift += drive * (factor * h / (k + 1));
    product.noalias() = s.rate.lazyProduct(lyapunov);
    lyapunov = product + product.transpose().eval();
    out.noise += lyapunov * (factor * h / (k + 1));
  }
}

void twice(Transition& t) {
  const CoreMatrix f = t.transition;
  CoreMatrix fq = f.lazyProduct(t.noise);
  t.noise += CoreMatrix(fq.lazyProduct(f.transpose()));
  t.noise = (0.5 * (t.noise + t.noise.transpose())).eval();
  t.shift += CoreVector(f.lazyProduct(t.shift));
  t.transition.noalias() = f.lazyProduct(f);
}

}  // namespace

void discretise(const LinearSystem& system, double dt_s, Transition& out) {
  const double norm = system.rate.size() ? system.rate.cwiseAbs().rowwise().sum().maxCoeff() : 0.0;
  int doublings = 0;
  double h = dt_s;
  while (norm * h > 0.5) {
    h *= 0.5;
    ++doublings;
  }
  short_step(system, h, terms_needed(norm * h), out);
  for (int i = 0; i < doublings; ++i) twice(out);
}

}  // namespace steelyard::engine
