// SPDX-License-Identifier: Apache-2.0
// Backward kernels. The covariance that is left is summed from positive parts (the form of Joseph, in Bucy &
// Joseph 1968), so that it is one whatever rounding did to the gain. Checked in tests/engine/settle_test.cc.
#include "engine/settle_kernel.h"

#include <algorithm>
#include <cmath>

#include "engine/time.h"

namespace steelyard::engine {
namespace {

using RowMajor = Eigen::Matrix<double, Eigen::Dynamic, Eigen::Dynamic, Eigen::RowMajor>;

int own_count(const Kept& h, int channel) {
  const int at = h.own_at[static_cast<std::size_t>(channel)];
  if (at < 0) return 0;
  for (int j = channel + 1; j < kMaxChannels; ++j)
    if (h.own_at[static_cast<std::size_t>(j)] >= 0) return h.own_at[static_cast<std::size_t>(j)] - at;
  return h.dim - at;
}

// Numbers that read as an offset or level; the rest of a channel's own are their rates.
int level_count(const Kept& h, int channel) {
  return own_count(h, channel) / (has_rate(h.conditions.of(channel)) ? 2 : 1);
}

// The number goes on: in the same condition, or in another walk.
bool goes_on(Condition before, Condition after) {
  return has_own(before) && (before == after || (is_walk(before) && is_walk(after)));
}

bool read_at(const Slice& slice, int channel) {
  const ChannelMemory& memory = slice.memory.channels[static_cast<std::size_t>(channel)];
  return memory.fused_any && memory.fused_at == slice.time;
}

}  // namespace

KernelMaker::KernelMaker(const Posterior& posterior)
    : model_(*posterior.model),
      layout_(posterior.layout),
      likelihood_(posterior.likelihood),
      first_colour_(layout_.fixed) {
  for (int j = 0; j < layout_.channels; ++j) {
    const int at = layout_.colour_at[static_cast<std::size_t>(j)];
    if (at < 0) continue;
    first_colour_ = std::min(first_colour_, at);
    colour_of_.push_back(j);
  }
}

void solve_semidefinite(Eigen::MatrixXd& s, const Eigen::MatrixXd& cross, Eigen::MatrixXd& gain) {
  const auto n = s.rows();
  gain = cross;
  const Eigen::VectorXd scale =
      s.diagonal().unaryExpr([](double v) { return v > 0.0 ? 1.0 / std::sqrt(v) : 0.0; });
  s = scale.asDiagonal() * s * scale.asDiagonal();
  gain = gain * scale.asDiagonal();
  // Cholesky with diagonal pivoting; `order` is what has been chosen so far, then the rest.
  std::vector<Eigen::Index> order(static_cast<std::size_t>(n));
  for (Eigen::Index i = 0; i < n; ++i) order[static_cast<std::size_t>(i)] = i;
  const auto at = [&](Eigen::Index i) { return order[static_cast<std::size_t>(i)]; };
  Eigen::Index rank = 0;
  for (; rank < n; ++rank) {
    Eigen::Index best = rank;
    for (Eigen::Index i = rank + 1; i < n; ++i)
      if (s(at(i), at(i)) > s(at(best), at(best))) best = i;
    std::swap(order[static_cast<std::size_t>(rank)], order[static_cast<std::size_t>(best)]);
    const Eigen::Index p = at(rank);
    if (!(s(p, p) > 1e-13)) break;
    s(p, p) = std::sqrt(s(p, p));
    for (Eigen::Index i = rank + 1; i < n; ++i) s(at(i), p) /= s(p, p);
    for (Eigen::Index i = rank + 1; i < n; ++i)
      for (Eigen::Index k = rank + 1; k < n; ++k) s(at(i), at(k)) -= s(at(i), p) * s(at(k), p);
  }
  for (Eigen::Index row = 0; row < gain.rows(); ++row) {
    for (Eigen::Index i = 0; i < rank; ++i) {
      for (Eigen::Index k = 0; k < i; ++k) gain(row, at(i)) -= s(at(i), at(k)) * gain(row, at(k));
      gain(row, at(i)) /= s(at(i), at(i));
    }
    for (Eigen::Index i = rank - 1; i >= 0; --i) {
      for (Eigen::Index k = i + 1; k < rank; ++k) gain(row, at(i)) -= s(at(k), at(i)) * gain(row, at(k));
      gain(row, at(i)) /= s(at(i), at(i));
    }
    for (Eigen::Index i = rank; i < n; ++i) gain(row, at(i)) = 0.0;
  }
  gain = gain * scale.asDiagonal();
}

Kernel kernel_at(double* at, int rows, int columns, int states) {
  double* expected = at + rows;
  double* gain = expected + columns;
  double* left = gain + rows * columns;
  double* held = left + rows * rows;
  return {at, expected, gain, left, held, Prospect::at(held + rows, states), rows, columns};
}

void Kernel::apply(const double* after_mean, const double* after_cov, double* scratch, double* mean_out,
                   double* cov_out) const {
  for (int i = 0; i < rows; ++i) {
    double* row = scratch + i * columns;
    if (const int column = static_cast<int>(held[i]); column >= 0) {
      mean_out[i] = after_mean[column];
      std::copy_n(after_cov + column * columns, columns, row);
      continue;
    }
    const double* g = gain + i * columns;
    std::fill_n(row, columns, 0.0);
    mean_out[i] = mean[i];
    for (int l = 0; l < columns; ++l) {
      mean_out[i] += g[l] * (after_mean[l] - expected[l]);
      for (int k = 0; k < columns; ++k) row[k] += g[l] * after_cov[l * columns + k];
    }
  }
  for (int i = 0; i < rows; ++i)
    for (int k = 0; k <= i; ++k) cov_out[i * rows + k] = cov_out[k * rows + i] = covariance(scratch, i, k);
}

// Of rows i and k; the scratch has gain · after_cov.
double Kernel::covariance(const double* scratch, int i, int k) const {
  if (held[k] >= 0.0) return scratch[i * columns + static_cast<int>(held[k])];
  if (held[i] >= 0.0) return scratch[k * columns + static_cast<int>(held[i])];
  double sum = left[i * rows + k];
  for (int l = 0; l < columns; ++l) sum += scratch[i * columns + l] * gain[k * columns + l];
  return sum;
}

void KernelMaker::find_carried(const Kept& before, const Kept& after, const Slice& slice) {
  carried_.clear();
  for (int i = 0; i < layout_.fixed; ++i) {
    const bool input = i >= layout_.states && i < layout_.core;
    if (!input || !(slice.inputs_reset >> (i - layout_.states) & 1U)) carried_.push_back({i, i, -1, -1});
  }
  for (int j = 0; j < layout_.channels; ++j) {
    const int at = layout_.colour_at[static_cast<std::size_t>(j)];
    const Condition to = after.conditions.of(j);
    const bool restarted =
        to == Condition::kStuck || to == Condition::kFrozen || before.conditions.of(j) != to;
    if (at >= 0 && restarted && read_at(slice, j))
      std::erase_if(carried_, [&](const Place& p) { return p.before == at; });
  }
  for (int j = 0; j < layout_.channels; ++j) {
    if (!goes_on(before.conditions.of(j), after.conditions.of(j))) continue;
    const auto u = static_cast<std::size_t>(j);
    const bool rates = has_rate(before.conditions.of(j)) && has_rate(after.conditions.of(j));
    const int levels = level_count(before, j);
    for (int i = 0; i < (rates ? 2 * levels : levels); ++i)
      carried_.push_back(
          {before.own_at[u] + i, after.own_at[u] + i, j, i < levels ? layout_.first_part[u] + i : -1});
  }
}

void KernelMaker::fill_transition(const Kept& before, const Slice& slice, const Move& move) {
  transition_.setIdentity(before.dim, before.dim);
  const double* core = slice.paths.data() + move.transition;
  const double* shift = slice.paths.data() + move.shift;
  for (int i = 0; i < layout_.core; ++i)
    for (int k = 0; k < layout_.core; ++k) transition_(i, k) = core[i * layout_.core + k];
  for (int i = layout_.core; i < layout_.fixed; ++i) transition_(i, i) = shift[i];
  for (int j = 0; j < layout_.channels; ++j) {
    if (!has_rate(before.conditions.of(j))) continue;
    const int levels = level_count(before, j);
    const int at = before.own_at[static_cast<std::size_t>(j)];
    for (int i = 0; i < levels; ++i) transition_(at + i, at + levels + i) = slice.gap_s;
  }
}

// A change to a faster walk takes a step of it at the reading (births.cc).
void KernelMaker::add_changed_walks(const Kept& before, const Kept& after, const Slice& slice) {
  const std::size_t parts = slice.walks.size() / kConditions;
  for (std::size_t c = 0; c < carried_.size(); ++c) {
    const Place& place = carried_[c];
    if (place.part < 0 || before.conditions.of(place.channel) >= after.conditions.of(place.channel)) continue;
    const auto to = static_cast<std::size_t>(after.conditions.of(place.channel));
    const auto at = static_cast<Eigen::Index>(c);
    noise_(at, at) += slice.walks[to * parts + static_cast<std::size_t>(place.part)] * slice.gap_s;
  }
}

// Correlated noise has its new part from the reading (likelihood.cc).
void KernelMaker::add_fresh_noise(const Slice& before, const Slice& after, int k) {
  const auto* noise =
      reinterpret_cast<const Gamma*>(after.learned.data() + after.learned_each * static_cast<std::size_t>(k));
  for (std::size_t c = 0; c < carried_.size(); ++c) {
    if (carried_[c].before < first_colour_ || carried_[c].before >= layout_.fixed) continue;
    const int j = colour_of_[static_cast<std::size_t>(carried_[c].before - first_colour_)];
    const auto u = static_cast<std::size_t>(j);
    if (!read_at(after, j)) continue;
    const ChannelMemory& last = before.memory.channels[u];
    const double keeps =
        last.fused_any ? correlation_over(model_.channels[u], seconds(after.time - last.fused_at)) : 0.0;
    const double spec_sd = after.memory.spec_sd[static_cast<std::size_t>(layout_.first_part[u])];
    const auto at = static_cast<Eigen::Index>(c);
    noise_(at, at) += likelihood_.noise_variance(noise[j], (1.0 - keeps * keeps) * spec_sd * spec_sd);
  }
}

// What is carried, as the earlier hypothesis expects it after the gap.
void KernelMaker::predict(const double* mean, const Slice& slice, const Move& move) {
  const auto c = static_cast<Eigen::Index>(carried_.size());
  const double* shift = slice.paths.data() + move.shift;
  const double* noise = slice.paths.data() + move.noise;
  const Eigen::Map<const Eigen::VectorXd> before(mean, move.dim);
  const int own = move.dim - layout_.fixed;
  const auto noise_of = [&](int i, int k) {
    if (i < layout_.core && k < layout_.core) return noise[i * layout_.core + k];
    if (i < layout_.fixed || k < layout_.fixed) return 0.0;
    return noise[layout_.core * layout_.core + (i - layout_.fixed) * own + k - layout_.fixed];
  };
  rows_.resize(c, move.dim);
  noise_.resize(c, c);
  for (Eigen::Index a = 0; a < c; ++a) {
    const int ia = carried_[static_cast<std::size_t>(a)].before;
    rows_.row(a) = transition_.row(ia);
    for (Eigen::Index b = 0; b < c; ++b)
      noise_(a, b) = noise_of(ia, carried_[static_cast<std::size_t>(b)].before);
  }
  expected_ = rows_.lazyProduct(before);
  for (Eigen::Index a = 0; a < c; ++a) {
    const int ia = carried_[static_cast<std::size_t>(a)].before;
    if (ia < layout_.core) expected_(a) += shift[ia];
  }
}

// What neither moves nor is driven, as a bias, was what it is: said exactly, and cheap to apply.
void KernelMaker::hold_constants() {
  held_.assign(static_cast<std::size_t>(cov_.rows()), -1);
  for (std::size_t c = 0; c < carried_.size(); ++c) {
    const int row = carried_[c].before;
    const auto a = static_cast<Eigen::Index>(c);
    const bool moves = rows_(a, row) != 1.0 || rows_.row(a).cwiseAbs().sum() != 1.0;
    if (moves || noise_.row(a).cwiseAbs().sum() != 0.0) continue;
    held_[static_cast<std::size_t>(row)] = carried_[c].after;
    gain_.row(row).setZero();
    gain_(row, a) = 1.0;
  }
}

void KernelMaker::write(const double* mean, int columns, double* out) const {
  const int n = static_cast<int>(cov_.rows());
  double* expected = std::copy(mean, mean + n, out);
  double* gain = expected + columns;
  double* left = gain + n * columns;
  std::fill(expected, left, 0.0);
  for (std::size_t a = 0; a < carried_.size(); ++a) {
    const int column = carried_[a].after;
    expected[column] = expected_(static_cast<Eigen::Index>(a));
    for (int r = 0; r < n; ++r) gain[r * columns + column] = gain_(r, static_cast<Eigen::Index>(a));
  }
  Eigen::Map<RowMajor>(left, n, n) = 0.5 * (left_ + left_.transpose());
  // The states are carried first.
  const int states = layout_.states;
  double* held = left + n * n;
  for (int r = 0; r < n; ++r) held[r] = held_[static_cast<std::size_t>(r)];
  const Prospect prospect = Prospect::at(held + n, states);
  std::copy(expected, expected + states, prospect.mean);
  Eigen::Map<RowMajor>(prospect.cov, states, states) = predicted_.topLeftCorner(states, states);
}

void KernelMaker::make(const Slice& before, int i, Slice& after, int k) {
  const Kept& from = before.kept[static_cast<std::size_t>(i)];
  const Kept& to = after.kept[static_cast<std::size_t>(k)];
  const double* mean = before.moments.data() + from.at;
  cov_ = Eigen::Map<const RowMajor>(mean + from.dim, from.dim, from.dim);
  carried_.clear();
  gain_.resize(from.dim, 0);
  held_.assign(static_cast<std::size_t>(from.dim), -1);
  left_ = cov_;
  predicted_.setZero(layout_.states, layout_.states);
  // What has a share has moved; were it not so, what was filtered would stay.
  if (const Move* move = after.move_of(from.conditions, to.mode)) {
    find_carried(from, to, after);
    fill_transition(from, after, *move);
    predict(mean, after, *move);
    add_changed_walks(from, to, after);
    add_fresh_noise(before, after, k);
    const Eigen::MatrixXd cross = cov_.lazyProduct(rows_.transpose());
    predicted_ = rows_.lazyProduct(cross);
    predicted_ += noise_;
    left_ = predicted_;
    solve_semidefinite(left_, cross, gain_);
    hold_constants();
    Eigen::MatrixXd rest = Eigen::MatrixXd::Identity(from.dim, from.dim);
    rest -= gain_.lazyProduct(rows_);
    left_ = Eigen::MatrixXd(rest.lazyProduct(cov_)).lazyProduct(rest.transpose());
    left_ += Eigen::MatrixXd(gain_.lazyProduct(noise_)).lazyProduct(gain_.transpose());
  }
  const std::size_t at = after.kernels.size();
  after.kernels.resize(at + Kernel::size(from.dim, to.dim, layout_.states));
  write(mean, to.dim, after.kernels.data() + at);
}

}  // namespace steelyard::engine
