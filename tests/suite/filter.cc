// SPDX-License-Identifier: Apache-2.0
#include "suite/filter.h"

namespace steelyard::suite {

Filter::Filter(const FilterModel& model, const Vector& unrest)
    : x(model.start), model_(model), unrest_(unrest), own_(static_cast<int>(model.start.size())) {
  P = model.start_sd.cwiseAbs2().asDiagonal();
}

void Filter::predict(const Vector& input) {
  Vector own = x.head(own_);
  Matrix F;
  Matrix Q;
  model_.move(input, own, F);
  model_.noise(unrest_, F, Q);
  x.head(own_) = own;
  const int extra = size() - own_;
  P.topLeftCorner(own_, own_) = (F * P.topLeftCorner(own_, own_) * F.transpose() + Q).eval();
  if (extra == 0) return;
  P.topRightCorner(own_, extra) = (F * P.topRightCorner(own_, extra)).eval();
  P.bottomLeftCorner(extra, own_) = P.topRightCorner(own_, extra).transpose().eval();
}

Expected Filter::expect(int part) const {
  Expected e;
  RowVector own = RowVector::Zero(own_);
  const Vector head = x.head(own_);
  e.value = model_.reads(part, head, own);
  e.h = RowVector::Zero(size());
  e.h.head(own_) = own;
  return e;
}

void Filter::update(const RowVector& h, double residual, double r) {
  const Vector column = P * h.transpose();
  const double s = h.dot(column) + r;
  const Vector gain = column / s;
  x += gain * residual;
  // Joseph's form for one reading: P − K c' − c K' + K s K'.
  P += (s * gain * gain.transpose() - gain * column.transpose() - column * gain.transpose()).eval();
}

void Filter::condition(const RowVector& h, double shift, double variance_before, double variance_after) {
  const Vector gain = P * h.transpose() / variance_before;
  x += gain * shift;
  P += ((variance_after - variance_before) * gain * gain.transpose()).eval();
}

int Filter::append(double mean, double variance) {
  const int n = size();
  Vector bigger(n + 1);
  bigger << x, mean;
  Matrix covariance = Matrix::Zero(n + 1, n + 1);
  covariance.topLeftCorner(n, n) = P;
  covariance(n, n) = variance;
  x = bigger;
  P = covariance;
  return n;
}

void Filter::become(int index, const RowVector& h, double value) {
  const double variance_of = variance(h);
  const Vector column = P * h.transpose();
  x[index] = value;
  P.row(index) = column.transpose();
  P.col(index) = column;
  P(index, index) = variance_of;
}

void Filter::remove(int index) {
  const int n = size();
  Vector smaller(n - 1);
  Matrix covariance(n - 1, n - 1);
  for (int i = 0; i < n - 1; ++i) {
    const int from_i = i + (i >= index ? 1 : 0);
    smaller[i] = x[from_i];
    for (int k = 0; k < n - 1; ++k) covariance(i, k) = P(from_i, k + (k >= index ? 1 : 0));
  }
  x = smaller;
  P = covariance;
}

}  // namespace steelyard::suite
