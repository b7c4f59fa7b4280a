// SPDX-License-Identifier: Apache-2.0
// The Kalman filter that all references are made of (extended where the machine's laws are not affine:
// Jazwinski 1970), with room for states that a reference appends. None of the engine's code.
#pragma once

#include "suite/machine.h"

namespace steelyard::suite {

/// What a filter expects of a part of the channels.
struct Expected {
  double value = 0.0;
  RowVector h;  ///< Jacobian, of the length of x
};

class Filter {
 public:
  Filter(const FilterModel& model, const Vector& unrest);

  /// One step of the machine under this input. Appended states stay as they are.
  void predict(const Vector& input);
  /// Of the machine's own part, without appended states.
  [[nodiscard]] Expected expect(int part) const;
  [[nodiscard]] double variance(const RowVector& h) const { return (h * P * h.transpose()).value(); }
  /// Fuses a residual of variance r. P stays symmetric by Joseph's form (Bucy & Joseph 1968).
  void update(const RowVector& h, double residual, double r);
  /// Takes h·x to have the given mean shift and a fraction of its variance: for readings that are intervals.
  void condition(const RowVector& h, double shift, double variance_before, double variance_after);

  /// A new state, independent of the rest; returns its index.
  int append(double mean, double variance);
  /// x[index] becomes a copy of h·x (with its covariances).
  void become(int index, const RowVector& h, double value);
  /// Forgets a state (marginalises over it); the indices above it fall by one.
  void remove(int index);

  [[nodiscard]] int own() const { return own_; }  ///< number of the machine's states
  [[nodiscard]] int size() const { return static_cast<int>(x.size()); }

  Vector x;
  Matrix P;

 private:
  const FilterModel& model_;
  Vector unrest_;
  int own_;
};

}  // namespace steelyard::suite
