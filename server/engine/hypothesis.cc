// SPDX-License-Identifier: Apache-2.0
// Storage of hypotheses, growing and shrinking of their vectors, merging by moments.
#include "engine/hypothesis.h"

#include <Eigen/Dense>
#include <algorithm>
#include <cmath>
#include <cstring>

#include "engine/normal.h"

namespace steelyard::engine {

static_assert(sizeof(Gamma) == 2 * sizeof(double), "Gammas live in the same storage as the moments");

Layout::Layout(const Model& model, bool with_lineage)
    : states(static_cast<int>(model.states.size())),
      core(states + static_cast<int>(model.inputs.size())),
      fixed(core),
      channels(static_cast<int>(model.channels.size())) {
  bias_at.fill(-1);
  colour_at.fill(-1);
  shape_at.fill(-1);
  for (std::size_t j = 0; j < model.channels.size(); ++j) {
    const auto& c = model.channels[j];
    first_part[j] = parts;
    part_count[j] = c.parts();
    for (int p = 0; p < c.parts(); ++p)
      if (c.part(p).bias_sd > 0.0) bias_at[static_cast<std::size_t>(parts + p)] = fixed++;
    parts += c.parts();
    if (c.parts() == 1) continue;
    shape_at[j] = shape_size;
    shape_size += c.parts() * c.parts();
  }
  for (std::size_t j = 0; j < model.channels.size(); ++j)
    if (model.channels[j].correlation > 0.0) colour_at[j] = fixed++;
  max_dim = fixed + 2 * parts;
  if (with_lineage) lineage = 2 * model.options.max_hypotheses;
}

Pool::Pool(const Layout& layout, int capacity)
    : channels_(static_cast<std::size_t>(layout.channels)),
      mean_size_(static_cast<std::size_t>(layout.max_dim)),
      cov_size_(mean_size_ * mean_size_),
      learned_size_(5 * channels_ + static_cast<std::size_t>(layout.shape_size)),
      lineage_size_(static_cast<std::size_t>(layout.lineage)),
      block_(mean_size_ + cov_size_ + learned_size_ + lineage_size_),
      items_(static_cast<std::size_t>(capacity)),
      block_of_(static_cast<std::size_t>(capacity)) {
  storage_.resize(block_ * items_.size());
  for (std::size_t i = 0; i < items_.size(); ++i) block_of_[i] = i;
  point_into_storage();
}

Pool::Pool(const Pool& other)
    : channels_(other.channels_),
      mean_size_(other.mean_size_),
      cov_size_(other.cov_size_),
      learned_size_(other.learned_size_),
      lineage_size_(other.lineage_size_),
      block_(other.block_),
      size_(other.size_),
      storage_(other.storage_),
      items_(other.items_),
      block_of_(other.block_of_) {
  point_into_storage();
}

Pool& Pool::operator=(const Pool& other) {
  if (this == &other) return *this;
  channels_ = other.channels_;
  mean_size_ = other.mean_size_;
  cov_size_ = other.cov_size_;
  learned_size_ = other.learned_size_;
  lineage_size_ = other.lineage_size_;
  block_ = other.block_;
  size_ = other.size_;
  storage_ = other.storage_;
  items_ = other.items_;
  block_of_ = other.block_of_;
  point_into_storage();
  return *this;
}

void Pool::point_into_storage() {
  for (std::size_t i = 0; i < items_.size(); ++i) {
    double* block = storage_.data() + block_ * block_of_[i];
    items_[i].mean = block;
    items_[i].cov = block + mean_size_;
    double* learned = block + mean_size_ + cov_size_;
    items_[i].noise = reinterpret_cast<Gamma*>(learned);
    items_[i].walk = reinterpret_cast<Gamma*>(learned + 2 * channels_);
    items_[i].since = learned + 4 * channels_;
    items_[i].shape = learned + 5 * channels_;
    items_[i].lineage = learned + learned_size_;
  }
}

Hypothesis& Pool::append() { return items_[static_cast<std::size_t>(size_++)]; }

void Pool::assign(Hypothesis& to, const Hypothesis& from) const {
  to.log_weight = from.log_weight;
  to.conditions = from.conditions;
  to.mode = from.mode;
  to.dim = from.dim;
  to.own_at = from.own_at;
  const auto dim = static_cast<std::size_t>(from.dim);
  std::memcpy(to.mean, from.mean, dim * sizeof(double));
  std::memcpy(to.cov, from.cov, dim * dim * sizeof(double));
  std::memcpy(to.noise, from.noise, (learned_size_ + lineage_size_) * sizeof(double));
}

Hypothesis& Pool::append_copy(const Hypothesis& from) {
  Hypothesis& to = append();
  assign(to, from);
  return to;
}

int Pool::group_end(int begin) const {
  int end = begin + 1;
  while (end < size_ && (*this)[end].conditions == (*this)[begin].conditions) ++end;
  return end;
}

void Pool::swap_items(int i, int k) {
  std::swap(items_[static_cast<std::size_t>(i)], items_[static_cast<std::size_t>(k)]);
  std::swap(block_of_[static_cast<std::size_t>(i)], block_of_[static_cast<std::size_t>(k)]);
}

namespace {

// Index in z at which the numbers of the first channel from `channel` on that has any begin.
int place_of(const Hypothesis& h, int channel) {
  for (int j = channel; j < kMaxChannels; ++j)
    if (h.own_at[static_cast<std::size_t>(j)] >= 0) return h.own_at[static_cast<std::size_t>(j)];
  return h.dim;
}

void shift_places(Hypothesis& h, int from, int by) {
  for (auto& at : h.own_at)
    if (at >= from) at = static_cast<std::int16_t>(at + by);
}

// A new element of z at index `at`; `cross` has its covariance with the old z.
void insert(Hypothesis& h, int at, double mean, double variance, const double* cross) {
  const int old = h.dim;
  const int dim = old + 1;
  // From the last row up, so that no element is overwritten before it has moved.
  for (int i = dim - 1; i >= 0; --i) {
    for (int k = dim - 1; k >= 0; --k) {
      const int oi = i - (i > at);
      const int ok = k - (k > at);
      double value;
      if (i == at && k == at) {
        value = variance;
      } else if (i == at) {
        value = cross[ok];
      } else if (k == at) {
        value = cross[oi];
      } else {
        value = h.cov[oi * old + ok];
      }
      h.cov[i * dim + k] = value;
    }
  }
  for (int i = dim - 1; i > at; --i) h.mean[i] = h.mean[i - 1];
  h.mean[at] = mean;
  shift_places(h, at, 1);
  h.dim = dim;
}

void erase(Hypothesis& h, int at) {
  const int old = h.dim;
  const int dim = old - 1;
  for (int i = 0; i < dim; ++i)
    for (int k = 0; k < dim; ++k) h.cov[i * dim + k] = h.cov[(i + (i >= at)) * old + k + (k >= at)];
  for (int i = at; i < dim; ++i) h.mean[i] = h.mean[i + 1];
  shift_places(h, at + 1, -1);
  h.dim = dim;
}

}  // namespace

void add_own(Hypothesis& h, int channel, double mean, double variance, const double* cross) {
  const int at = place_of(h, channel);
  insert(h, at, mean, variance, cross);
  h.own_at[static_cast<std::size_t>(channel)] = static_cast<std::int16_t>(at);
}

int add_own(Hypothesis& h, int channel, int count) {
  const std::array<double, kMaxDim> none{};
  const int at = place_of(h, channel);
  for (int i = 0; i < count; ++i) insert(h, at, 0.0, 0.0, none.data());
  h.own_at[static_cast<std::size_t>(channel)] = static_cast<std::int16_t>(at);
  return at;
}

void add_rate(Hypothesis& h, int channel, std::span<const double> variance) {
  const std::array<double, kMaxDim> none{};
  const int parts = static_cast<int>(variance.size());
  const int at = h.own_at[static_cast<std::size_t>(channel)] + parts;
  for (int i = 0; i < parts; ++i) insert(h, at + i, 0.0, variance[static_cast<std::size_t>(i)], none.data());
}

void drop_rate(Hypothesis& h, int channel, int parts) {
  const int at = h.own_at[static_cast<std::size_t>(channel)] + parts;
  for (int i = 0; i < parts; ++i) erase(h, at);
}

void drop_own(Hypothesis& h, int channel) {
  const auto j = static_cast<std::size_t>(channel);
  const int at = h.own_at[j];
  const int count = place_of(h, channel + 1) - at;
  for (int i = 0; i < count; ++i) erase(h, at);
  h.own_at[j] = -1;
}

namespace {

using Shape = Eigen::Matrix<double, Eigen::Dynamic, Eigen::Dynamic, Eigen::ColMajor, kMaxParts, kMaxParts>;

Shape apply(const Shape& symmetric, double (*f)(double)) {
  const Eigen::SelfAdjointEigenSolver<Shape> eigen(symmetric);
  const Shape scaled = eigen.eigenvectors() * eigen.eigenvalues().unaryExpr(f).asDiagonal();
  return scaled.lazyProduct(eigen.eigenvectors().transpose());
}

// The mean of their logarithms, as for scalar channels (log-Euclidean mean: Arsigny et al. 2007).
void mix_shapes(double* into, const double* from, int parts, double p) {
  if (std::equal(into, into + parts * parts, from)) return;
  const auto log = [](double v) { return std::log(std::max(v, 1e-300)); };
  const auto exp = [](double v) { return std::exp(v); };
  Eigen::Map<Eigen::MatrixXd> a(into, parts, parts);
  const Shape b = Eigen::Map<const Eigen::MatrixXd>(from, parts, parts);
  const Shape mean = (1.0 - p) * apply(a, log) + p * apply(b, log);
  a = apply(mean, exp);
}

}  // namespace

void merge(Hypothesis& into, const Hypothesis& from, const Layout& layout) {
  const double total = log_sum(into.log_weight, from.log_weight);
  const double p = std::exp(from.log_weight - total);
  const int dim = into.dim;
  for (int i = 0; i < dim; ++i) {
    const double di = from.mean[i] - into.mean[i];
    for (int k = 0; k < dim; ++k) {
      const double dk = from.mean[k] - into.mean[k];
      const double here = into.cov[i * dim + k];
      into.cov[i * dim + k] = here + p * (from.cov[i * dim + k] - here + (1.0 - p) * di * dk);
    }
  }
  for (int i = 0; i < dim; ++i) into.mean[i] += p * (from.mean[i] - into.mean[i]);
  for (int j = 0; j < layout.channels; ++j) {
    into.noise[j] = mix(into.noise[j], from.noise[j], p);
    into.walk[j] = mix(into.walk[j], from.walk[j], p);
    into.since[j] += p * (from.since[j] - into.since[j]);
  }
  for (std::size_t j = 0; j < static_cast<std::size_t>(layout.channels); ++j)
    if (layout.shape_at[j] >= 0)
      mix_shapes(into.shape + layout.shape_at[j], from.shape + layout.shape_at[j], layout.part_count[j], p);
  for (int i = 0; i < layout.lineage; ++i) into.lineage[i] += p * (from.lineage[i] - into.lineage[i]);
  into.log_weight = total;
}

}  // namespace steelyard::engine
