// SPDX-License-Identifier: Apache-2.0
#include "cli/steady.h"

#include <Eigen/Dense>
#include <algorithm>
#include <cmath>
#include <limits>
#include <numeric>

#include "engine/discretise.h"

namespace steelyard::client {
namespace {

using Eigen::Index;
using Eigen::MatrixXd;

// Steps of a cycle in which every channel reads at its own period. Where the periods fit together only in a
// longer one, each channel's information is spread evenly over all steps instead.
constexpr long kMostSteps = 1024;

double noise_variance(const engine::PartModel& part) {
  return part.sd * part.sd + part.resolution * part.resolution / 12.0;
}

void symmetrise(MatrixXd& m) { m = (0.5 * (m + m.transpose())).eval(); }

}  // namespace

CovarianceStep step_of(const MatrixXd& transition, const MatrixXd& noise, const MatrixXd& reads,
                       const MatrixXd& reading_noise) {
  const Index n = transition.rows();
  if (reads.rows() == 0) return {transition, noise, MatrixXd::Zero(n, n)};
  const MatrixXd cross = noise * reads.transpose();
  const MatrixXd total = reads * cross + reading_noise;
  const Eigen::LDLT<MatrixXd> solver(total);
  const MatrixXd keep = MatrixXd::Identity(n, n) - cross * solver.solve(reads);
  const MatrixXd seen = reads * transition;
  CovarianceStep out{keep * transition, keep * noise, seen.transpose() * solver.solve(seen)};
  symmetrise(out.c);
  symmetrise(out.j);
  return out;
}

CovarianceStep together(const CovarianceStep& first, const CovarianceStep& second) {
  const Index n = first.a.rows();
  const Eigen::PartialPivLU<MatrixXd> between(MatrixXd::Identity(n, n) + first.c * second.j);
  const MatrixXd through = second.a * between.solve(first.a);
  CovarianceStep out{through, second.a * between.solve(first.c) * second.a.transpose() + second.c,
                     first.a.transpose() * second.j * between.solve(first.a) + first.j};
  symmetrise(out.c);
  symmetrise(out.j);
  return out;
}

MatrixXd after(const CovarianceStep& step, const MatrixXd& before) {
  const Index n = before.rows();
  const Eigen::PartialPivLU<MatrixXd> between(MatrixXd::Identity(n, n) + before * step.j);
  return step.a * between.solve(before) * step.a.transpose() + step.c;
}

LongRun::LongRun(const engine::Model& model, const Point& point)
    : model_(model), states_(static_cast<Index>(model.states.size())), size_(states_) {
  rate_ = MatrixXd::Zero(states_, states_);
  density_ = Eigen::VectorXd::Zero(states_);
  Eigen::VectorXd unit(states_);
  for (Index i = 0; i < states_; ++i) unit(i) = model.states[static_cast<std::size_t>(i)].start_sd;
  for (Index i = 0; i < states_; ++i) {
    const engine::StateModel& state = model.states[static_cast<std::size_t>(i)];
    rate_.row(i) = slopes_of(model, state.rate, point).cwiseProduct(unit.transpose()) / unit(i);
    density_(i) = std::pow(state.unrest / unit(i), 2);
  }
  Index parts = 0;
  for (const engine::ChannelModel& channel : model.channels) {
    row_of_.push_back(parts);
    parts += channel.parts();
    for (int p = 0; p < channel.parts(); ++p) size_ += channel.part(p).bias_sd > 0.0 ? 1 : 0;
    size_ += channel.correlation > 0.0 ? 1 : 0;
  }
  reads_ = MatrixXd::Zero(parts, size_);
  Index next = states_;
  for (std::size_t j = 0; j < model.channels.size(); ++j) {
    const engine::ChannelModel& channel = model.channels[j];
    for (int p = 0; p < channel.parts(); ++p) {
      auto row = reads_.row(row_of_[j] + p);
      row.head(states_) = slopes_of(model, channel.part(p).reads, point).cwiseProduct(unit.transpose());
      if (channel.part(p).bias_sd > 0.0) row(next++) = channel.part(p).bias_sd;
    }
    colour_at_.push_back(channel.correlation > 0.0 ? next : -1);
    if (channel.correlation > 0.0) reads_(row_of_[j], next++) = std::sqrt(noise_variance(channel));
  }
  find_step();
}

double LongRun::period_s(int channel) const {
  const double period = model_.channels[static_cast<std::size_t>(channel)].period_s;
  return period > 0.0 ? period : model_.response_s / kUsualReadings;
}

void LongRun::move(double dt_s, MatrixXd& transition, MatrixXd& noise) const {
  engine::LinearSystem system;
  system.rate = rate_;
  system.drive = Eigen::VectorXd::Zero(states_);
  system.density = density_;
  engine::Transition exact;
  engine::discretise(system, dt_s, exact);
  transition = MatrixXd::Identity(size_, size_);
  noise = MatrixXd::Zero(size_, size_);
  transition.topLeftCorner(states_, states_) = exact.transition;
  noise.topLeftCorner(states_, states_) = exact.noise;
  for (std::size_t j = 0; j < colour_at_.size(); ++j) {
    if (colour_at_[j] < 0) continue;
    const engine::ChannelModel& channel = model_.channels[j];
    const double keeps = std::pow(channel.correlation, dt_s / period_s(static_cast<int>(j)));
    transition(colour_at_[j], colour_at_[j]) = keeps;
    noise(colour_at_[j], colour_at_[j]) = 1.0 - keeps * keeps;
  }
}

/// Appends the channel's rows and their noise, `spread` times as large as it is.
void LongRun::read(int channel, double spread, MatrixXd& reads, MatrixXd& noise) const {
  constexpr double kNone = 1e-9;  // of the variance: correlated noise is a state, little stays here
  const auto j = static_cast<std::size_t>(channel);
  const engine::ChannelModel& model = model_.channels[j];
  const Index at = reads.rows();
  const Index parts = model.parts();
  reads.conservativeResize(at + parts, size_);
  reads.bottomRows(parts) = reads_.middleRows(row_of_[j], parts);
  noise.conservativeResizeLike(MatrixXd::Zero(at + parts, at + parts));
  std::size_t pair = 0;
  for (int p = 0; p < model.parts(); ++p) {
    const double variance = noise_variance(model.part(p));
    noise(at + p, at + p) = variance * (colour_at_[j] >= 0 ? kNone : spread);
    for (int q = p + 1; q < model.parts() && !model.part_correlation.empty(); ++q) {
      const double both =
          spread * model.part_correlation[pair++] * std::sqrt(variance * noise_variance(model.part(q)));
      noise(at + p, at + q) = noise(at + q, at + p) = both;
    }
  }
}

/// All of these channels at their periods once round, ending with a reading of each.
CovarianceStep LongRun::cycle(const std::vector<int>& channels, double& length_s) const {
  const auto most = size_ <= 16 ? kMostSteps : kMostSteps / 8;
  long steps = 1;
  for (const int channel : channels) {
    if (steps > most || step_s_ == 0.0) break;
    steps = std::lcm(steps, std::lround(period_s(channel) / step_s_));
  }
  const bool spread = step_s_ == 0.0 || steps > most;
  const double step_s = spread ? shortest_s_ : step_s_;
  if (spread) steps = 1;
  MatrixXd transition;
  MatrixXd noise;
  move(step_s, transition, noise);
  CovarianceStep out;
  for (long i = 1; i <= steps; ++i) {
    MatrixXd reads(0, size_);
    MatrixXd reading_noise(0, 0);
    for (const int channel : channels) {
      const double ratio = period_s(channel) / step_s;
      if (spread || i % std::lround(ratio) == 0) read(channel, spread ? ratio : 1.0, reads, reading_noise);
    }
    const CovarianceStep step = step_of(transition, noise, reads, reading_noise);
    out = i == 1 ? step : together(out, step);
  }
  length_s = static_cast<double>(steps) * step_s;
  return out;
}

/// A step that all periods are whole multiples of, by a step at most 20 times shorter than the shortest.
void LongRun::find_step() {
  constexpr int kMostParts = 20;
  constexpr double kWhole = 1e-6;
  constexpr double kMostRatio = 1e6;
  const auto count = static_cast<int>(model_.channels.size());
  shortest_s_ = period_s(0);
  for (int i = 1; i < count; ++i) shortest_s_ = std::min(shortest_s_, period_s(i));
  for (int parts = 1; parts <= kMostParts && step_s_ == 0.0; ++parts) {
    const double step_s = shortest_s_ / parts;
    bool fits = true;
    for (int i = 0; i < count && fits; ++i) {
      const double ratio = period_s(i) / step_s;
      fits = ratio < kMostRatio && std::abs(ratio - std::round(ratio)) < kWhole * ratio;
    }
    if (fits) step_s_ = step_s;
  }
}

Accuracy LongRun::with(const std::vector<int>& channels) const {
  constexpr double kGrows = 1.01;  // of the sd, while the time doubles
  double length_s = 0.0;
  CovarianceStep run = cycle(channels, length_s);
  const MatrixXd start = MatrixXd::Identity(size_, size_);
  MatrixXd before = start;
  for (; length_s < kResponses * model_.response_s; length_s *= 2.0) {
    before = after(run, start);
    run = together(run, run);
  }
  const MatrixXd end = after(run, start);
  Accuracy out;
  for (Index i = 0; i < states_; ++i) {
    const double unit = model_.states[static_cast<std::size_t>(i)].start_sd;
    const double variance = end(i, i);
    const bool known = end.allFinite() && variance >= 0.0;
    out.sd.push_back(known ? unit * std::sqrt(variance) : std::numeric_limits<double>::infinity());
    out.growing.push_back(!known || variance > kGrows * kGrows * before(i, i));
  }
  return out;
}

}  // namespace steelyard::client
