// SPDX-License-Identifier: Apache-2.0
// The row space h, hF, hF², … is built vector by vector (Krylov), each new one made orthogonal to those
// before: powers of F are never formed, whose sizes would drown each other.
#include "cli/observe.h"

#include <cmath>
#include <span>
#include <variant>

namespace steelyard::client {
namespace {

using Eigen::MatrixXd;
using Eigen::RowVectorXd;
using Index = Eigen::Index;

constexpr double kNegligible = 1e-6;  // numerical derivatives are good to about 1e-8
constexpr double kStep = 1e-4;        // of start_sd, for those derivatives

double formula_value(const engine::Law& law, std::span<const double> states, std::span<const double> inputs) {
  if (const auto* formula = std::get_if<std::shared_ptr<engine::Formula>>(&law)) {
    return *formula ? (*formula)->evaluate(states, inputs, 0.0) : 0.0;
  }
  return 0.0;
}

/// Slopes, each in units of the state's start_sd.
RowVectorXd gradient(const engine::Model& model, const engine::Law& law, const Point& point) {
  RowVectorXd result = slopes_of(model, law, point);
  for (Index i = 0; i < result.size(); ++i) result(i) *= model.states[static_cast<std::size_t>(i)].start_sd;
  return result;
}

/// The part of `row` that is orthogonal to the rows of `space`; twice, for accuracy.
RowVectorXd beyond(const MatrixXd& space, RowVectorXd row) {
  for (int pass = 0; pass < 2 && space.rows() > 0; ++pass) row -= (row * space.transpose()) * space;
  return row;
}

bool extend(MatrixXd& space, const RowVectorXd& row) {
  const double length = row.norm();
  if (!(length > 0.0)) return false;
  const RowVectorXd rest = beyond(space, row / length);
  if (!(rest.norm() > kNegligible)) return false;
  space.conservativeResize(space.rows() + 1, row.cols());
  space.row(space.rows() - 1) = rest / rest.norm();
  return true;
}

}  // namespace

RowVectorXd slopes_of(const engine::Model& model, const engine::Law& law, const Point& point) {
  std::vector<double> states = point.states;
  RowVectorXd result = RowVectorXd::Zero(static_cast<Index>(states.size()));
  for (std::size_t i = 0; i < states.size(); ++i) {
    double slope = 0.0;
    if (const auto* affine = std::get_if<engine::AffineForm>(&law)) {
      slope = i < affine->on_states.size() ? affine->on_states[i] : 0.0;
    } else {
      const double at = states[i];
      const double step = kStep * model.states[i].start_sd;
      states[i] = at + step;
      const double above = formula_value(law, states, point.inputs);
      states[i] = at - step;
      slope = (above - formula_value(law, states, point.inputs)) / (2.0 * step);
      states[i] = at;
    }
    // Where a formula has no finite slope (a square root at 0) this point tells nothing of it.
    if (std::isfinite(slope)) result(static_cast<Index>(i)) = slope;
  }
  return result;
}

Linearised::Linearised(const engine::Model& model, const Point& point) {
  const auto n = static_cast<Index>(point.states.size());
  motion_ = MatrixXd::Zero(n, n);
  for (Index i = 0; i < n; ++i) {
    const engine::StateModel& state = model.states[static_cast<std::size_t>(i)];
    motion_.row(i) = gradient(model, state.rate, point) * (model.response_s / state.start_sd);
  }
  row_of_.push_back(0);
  for (const engine::ChannelModel& channel : model.channels) {
    row_of_.push_back(row_of_.back() + channel.parts());
  }
  reads_ = MatrixXd::Zero(row_of_.back(), n);
  for (std::size_t j = 0; j < model.channels.size(); ++j) {
    for (int part = 0; part < model.channels[j].parts(); ++part) {
      const RowVectorXd row = gradient(model, model.channels[j].part(part).reads, point);
      if (row.norm() > 0.0) reads_.row(row_of_[j] + part) = row / row.norm();
    }
  }
}

MatrixXd Linearised::shown_space(const std::vector<int>& channels) const {
  MatrixXd space(0, motion_.cols());
  for (const int channel : channels) {
    const auto index = static_cast<std::size_t>(channel);
    for (Index row = row_of_[index]; row < row_of_[index + 1]; ++row) extend(space, reads_.row(row));
  }
  const double size = motion_.norm();
  // Rows that are added are followed on in turn; there are at most as many as states.
  for (Index i = 0; i < space.rows(); ++i) {
    const RowVectorXd next = space.row(i) * motion_;
    if (next.norm() > kNegligible * size) extend(space, next);
  }
  return space;
}

std::vector<bool> Linearised::shown_states(const std::vector<int>& channels) const {
  const MatrixXd space = shown_space(channels);
  std::vector<bool> shown;
  for (Index i = 0; i < motion_.cols(); ++i) {
    const RowVectorXd axis = RowVectorXd::Unit(motion_.cols(), i);
    shown.push_back(beyond(space, axis).norm() < 1e-4);
  }
  return shown;
}

bool Linearised::foretold(int channel, const std::vector<int>& by) const {
  const MatrixXd space = shown_space(by);
  const auto index = static_cast<std::size_t>(channel);
  for (Index i = row_of_[index]; i < row_of_[index + 1]; ++i) {
    const RowVectorXd row = reads_.row(i);
    if (!(row.norm() > 0.0) || !(beyond(space, row).norm() < 1e-4)) return false;
  }
  return true;
}

Point start_of(const engine::Model& model) {
  Point point;
  for (const engine::StateModel& state : model.states) point.states.push_back(state.start);
  for (const engine::InputModel& input : model.inputs) point.inputs.push_back(input.start);
  return point;
}

Point near_start_of(const engine::Model& model) {
  constexpr double kAtWork = 0.6;  // of an input's range
  Point point;
  double share = 0.31;  // of start_sd; another one for each state
  for (const engine::StateModel& state : model.states) {
    point.states.push_back(state.start + share * state.start_sd);
    share = share * 1.17 > 0.6 ? 0.23 : share * 1.17;
  }
  for (const engine::InputModel& input : model.inputs) {
    point.inputs.push_back(input.hi > input.lo ? input.lo + kAtWork * (input.hi - input.lo) : input.start);
  }
  return point;
}

}  // namespace steelyard::client
