// SPDX-License-Identifier: Apache-2.0
// A machine of the suite: how it really moves, what its channels really show, what the rig says of it, and
// what the reference filters know of it. Everything else in the suite works on any machine.
#pragma once

#include <Eigen/Core>
#include <cstdint>
#include <functional>
#include <memory>
#include <string>
#include <vector>

#include "engine/model.h"
#include "suite/row.h"

namespace steelyard::suite {

/// States and what a reference filter adds to them; bounded so that filters do not allocate.
inline constexpr int kMaxDimension = 16;
using Vector = Eigen::Matrix<double, Eigen::Dynamic, 1, 0, kMaxDimension, 1>;
using RowVector = Eigen::Matrix<double, 1, Eigen::Dynamic, Eigen::RowMajor, 1, kMaxDimension>;
using Matrix = Eigen::Matrix<double, Eigen::Dynamic, Eigen::Dynamic, 0, kMaxDimension, kMaxDimension>;

/// One run of the machine; all by step.
struct Truth {
  std::vector<Vector> state;      ///< in the order and units of the engine's states
  std::vector<Vector> input;      ///< as the controller reports it
  std::vector<double> changes_s;  ///< times of set-point changes
};

/// A state by which estimates are judged.
struct Judged {
  int state = 0;
  double scale = 1.0;  ///< errors of several states are added up as multiples of it
  double turn = 0.0;   ///< errors are taken modulo this
};

/// What the reference filters know: a model of their own, with constant process noise.
struct FilterModel {
  Vector start;
  Vector start_sd;
  /// Moves x by one step under the given input; F becomes the Jacobian.
  std::function<void(const Vector& input, Vector& x, Matrix& F)> move;
  /// Covariance that one step adds, for white noise of these densities on the states' derivatives.
  std::function<void(const Vector& unrest, const Matrix& F, Matrix& Q)> noise;
  /// What a part of the channels shows; h becomes the Jacobian (sized as x, zeroed before).
  std::function<double(int part, const Vector& x, RowVector& h)> reads;
  Vector unrest;  ///< per √s: those that fit runs without faults best (fault_suite --fit)
};

struct Machine {
  std::string name;
  std::string about;  ///< for the page
  bool quick = true;
  double response_s = 1.0;
  double step_s = 0.02;
  int steps = 0;
  double fault_from_s = 0.0;  ///< usual fault window
  double fault_to_s = 0.0;
  bool declares_period = true;
  std::vector<Channel> channels;  ///< parts of all channels are numbered through in this order
  std::vector<Judged> judged;
  std::function<Truth(std::uint64_t seed, bool at_rest)> simulate;
  std::function<double(int part, const Vector& state)> shows;  ///< without noise and rounding
  /// States, inputs and each channel's law (`reads`, of `others` too); declare.h fills in the rest.
  std::function<engine::Model()> engine_model;
  FilterModel filter;
  std::vector<Row> rows;

  [[nodiscard]] int parts() const;
  [[nodiscard]] int first_part(int channel) const;
  [[nodiscard]] int best() const { return 0; }  ///< the most precise channel stands first
  /// First step that counts: after 6 % of the run.
  [[nodiscard]] int first_judged() const { return steps * 6 / 100; }
};

/// trolley, basin, cart, thermal; built once.
[[nodiscard]] const std::vector<Machine>& machines();
/// Throws std::out_of_range that names it if there is none.
[[nodiscard]] const Machine& machine(const std::string& name);

[[nodiscard]] Machine make_trolley();
[[nodiscard]] Machine make_basin();
[[nodiscard]] Machine make_cart();
[[nodiscard]] Machine make_plant();

/// The row's channels: the machine's, with the row's traits.
[[nodiscard]] std::vector<Channel> channels_of(const Machine& machine, const Row& row);

}  // namespace steelyard::suite
