// SPDX-License-Identifier: Apache-2.0
// The window of slices and the way back through it. Bounds: Settling::max_slices and max_bytes; at either the
// oldest slice is settled early, with what there is. Checked in tests/engine/settle_test.cc.
#include "engine/settle.h"

#include <algorithm>
#include <cmath>
#include <cstring>

#include "engine/time.h"

namespace steelyard::engine {
namespace {

constexpr double kFollowed = 1e-12;  // smoothed weight under which a hypothesis is not followed further back
constexpr double kWorthWeighing = 10.0;  // groups with so many times the negligible weight ask the future
constexpr double kReported = 1e-20;      // and is not reported, as in Options::weight_floor

}  // namespace

Settler::Settler(const Posterior& posterior, Settling settling)
    : layout_(posterior.layout),
      settling_(std::move(settling)),
      kernels_(posterior),
      evidence_(layout_),
      trails_(layout_, layout_.lineage),
      scratch_(static_cast<std::size_t>(layout_.max_dim * layout_.max_dim)),
      pool_(layout_, layout_.lineage) {
  pair_.resize(scratch_.size() + static_cast<std::size_t>(layout_.max_dim));
}

void Settler::close(Posterior& posterior, TimeNs next) {
  store(posterior);
  settle(posterior, due(next));
  while (!window_.empty() && beyond_limits()) {
    early_ += window_.front().read;
    settle(posterior, 1);
  }
  restart_lineages(posterior.now, layout_);
}

void Settler::store(const Posterior& posterior) {
  open_.keep(posterior);
  window_.push_back(std::move(open_));
  open_ = Slice();
  if (spare_.empty()) return;
  open_ = std::move(spare_.back());
  spare_.pop_back();
  open_.clear();
}

void Settler::moved(TimeNs from, TimeNs to, const Walks& walks) {
  open_.gap_s = seconds(to - from);
  open_.keep_moves(trails_.shadows(), trails_.transitions(), walks, layout_);
}

void Settler::finish(Posterior& posterior) {
  store(posterior);
  settle(posterior, static_cast<int>(window_.size()));
}

// How many slices have t + lag < next: no reading that is still to come counts for them.
int Settler::due(TimeNs next) const {
  int count = 0;
  for (const Slice& slice : window_) {
    // Differences of times may not fit; next is never before a slice.
    const auto behind = static_cast<std::uint64_t>(next) - static_cast<std::uint64_t>(slice.time);
    if (behind <= static_cast<std::uint64_t>(settling_.lag_ns)) break;
    ++count;
  }
  return count;
}

bool Settler::beyond_limits() const {
  std::size_t bytes = 0;
  for (const Slice& slice : window_) bytes += slice.bytes();
  return window_.size() >= static_cast<std::size_t>(settling_.max_slices) || bytes > settling_.max_bytes;
}

// One way back from the newest slice; the `count` oldest are reported, in the order of time.
void Settler::settle(const Posterior& posterior, int count) {
  settled_.clear();
  int last = 0;  // the way ends at the oldest that is wanted
  while (last < count && !window_[static_cast<std::size_t>(last)].read) ++last;
  if (last < count) {
    const Slice& newest = window_.back();
    now_.moments = newest.moments;
    now_.weight.clear();
    for (const Kept& h : newest.kept) now_.weight.push_back(h.weight);
    now_.mixed = now_.weight;
    for (int s = static_cast<int>(window_.size()) - 1; s >= last; --s) {
      Slice& slice = window_[static_cast<std::size_t>(s)];
      if (s < count && slice.read) estimate(posterior, slice);
      if (s > last) step(window_[static_cast<std::size_t>(s - 1)], slice);
    }
  }
  drop_oldest(count);
  for (auto e = settled_.rbegin(); e != settled_.rend(); ++e) settling_.settled(*e);
}

void Settler::drop_oldest(int count) {
  for (int i = 0; i < count; ++i) {
    if (spare_.size() < 2) spare_.push_back(std::move(window_.front()));
    window_.pop_front();
  }
}

// From now_, the smoothed `after`, to the smoothed `before`. Pairs of negligible weight give their weight but
// no moments; a hypothesis that has no pair keeps what was filtered.
void Settler::step(const Slice& before, Slice& after) {
  past_.moments.resize(before.moments.size());
  past_.weight.assign(before.kept.size(), 0.0);
  past_.mixed.assign(before.kept.size(), 0.0);
  for (std::size_t k = 0; k < after.kept.size(); ++k) {
    if (!(now_.weight[k] > kFollowed)) continue;
    for (int begin = after.first_share[k]; begin < after.first_share[k + 1];) {
      const int end = group_end(before, after, begin, after.first_share[k + 1]);
      step_group(before, after, static_cast<int>(k), begin, end);
      begin = end;
    }
  }
  for (std::size_t i = 0; i < before.kept.size(); ++i) {
    if (past_.mixed[i] > 0.0 || past_.weight[i] < settling_.negligible) continue;
    const Kept& h = before.kept[i];
    std::copy_n(before.moments.data() + h.at, h.dim + h.dim * h.dim, past_.moments.data() + h.at);
  }
  std::swap(now_, past_);
}

// End of the shares, from `begin` on, whose ancestors have equal conditions.
int Settler::group_end(const Slice& before, const Slice& after, int begin, int last) {
  const auto conditions = [&](int s) {
    return before.kept[static_cast<std::size_t>(after.shares[static_cast<std::size_t>(s)].ancestor)]
        .conditions;
  };
  int end = begin + 1;
  while (end < last && conditions(end) == conditions(begin)) ++end;
  return end;
}

void Settler::step_group(const Slice& before, Slice& after, int k, int begin, int end) {
  const auto u = static_cast<std::size_t>(k);
  const Kept& to = after.kept[u];
  const std::span<Share> shares(after.shares.data() + begin, static_cast<std::size_t>(end - begin));
  weights_.clear();
  double sum = 0.0;
  for (const Share& share : shares) sum += weights_.emplace_back(now_.weight[u] * share.of_weight);
  const double* moments = now_.moments.data() + to.at;
  if (sum >= settling_.negligible) {
    find_kernels(before, after, k, shares);
    if (sum >= kWorthWeighing * settling_.negligible)
      evidence_.reweigh(prospects_, moments, moments + to.dim, to.dim, weights_);
  }
  for (std::size_t s = 0; s < shares.size(); ++s) {
    const int i = shares[s].ancestor;
    past_.weight[static_cast<std::size_t>(i)] += weights_[s];
    if (sum < settling_.negligible || weights_[s] < settling_.negligible) continue;
    group_[s].apply(moments, moments + to.dim, scratch_.data(), pair_.data(), pair_.data() + group_[s].rows);
    mix(before, i, weights_[s]);
  }
}

// All of a group are made at once: each is seen from where all of them were predicted to be.
void Settler::find_kernels(const Slice& before, Slice& after, int k, std::span<Share> shares) {
  const bool missing = shares.front().kernel < 0;
  for (Share& share : shares) {
    if (!missing) break;
    share.kernel = static_cast<std::ptrdiff_t>(after.kernels.size());
    kernels_.make(before, share.ancestor, after, k);
  }
  group_.clear();
  prospects_.clear();
  for (const Share& share : shares) {
    group_.push_back(kernel_at(after.kernels.data() + share.kernel,
                               before.kept[static_cast<std::size_t>(share.ancestor)].dim,
                               after.kept[static_cast<std::size_t>(k)].dim, layout_.states));
    prospects_.push_back(group_.back().prospect);
  }
  if (missing) evidence_.prepare(prospects_, weights_);
}

// Adds pair_ to the mixture of hypothesis i, by moments.
void Settler::mix(const Slice& before, int i, double weight) {
  const Kept& h = before.kept[static_cast<std::size_t>(i)];
  double* mean = past_.moments.data() + h.at;
  double* cov = mean + h.dim;
  const double* from_mean = pair_.data();
  const double* from_cov = from_mean + h.dim;
  double& mixed = past_.mixed[static_cast<std::size_t>(i)];
  mixed += weight;
  const double p = weight / mixed;
  if (p == 1.0) {
    std::copy(from_mean, from_cov + h.dim * h.dim, mean);
    return;
  }
  for (int a = 0; a < h.dim; ++a) {
    const double da = from_mean[a] - mean[a];
    for (int b = 0; b < h.dim; ++b) {
      double& here = cov[a * h.dim + b];
      here += p * (from_cov[a * h.dim + b] - here + (1.0 - p) * da * (from_mean[b] - mean[b]));
    }
  }
  for (int a = 0; a < h.dim; ++a) mean[a] += p * (from_mean[a] - mean[a]);
}

void Settler::estimate(const Posterior& posterior, const Slice& slice) {
  pool_.clear();
  const std::size_t learned = pool_.learned_size();
  for (std::size_t i = 0; i < slice.kept.size(); ++i) {
    if (!(now_.weight[i] > kReported)) continue;
    const Kept& kept = slice.kept[i];
    Hypothesis& h = pool_.append();
    h.log_weight = std::log(now_.weight[i]);
    h.conditions = kept.conditions;
    h.mode = kept.mode;
    h.dim = kept.dim;
    h.own_at = kept.own_at;
    const double* moments = (now_.mixed[i] > 0.0 ? now_.moments : slice.moments).data() + kept.at;
    std::copy_n(moments, h.dim, h.mean);
    std::copy_n(moments + h.dim, h.dim * h.dim, h.cov);
    std::memcpy(reinterpret_cast<double*>(h.noise), slice.learned.data() + learned * i,
                learned * sizeof(double));
  }
  settled_.emplace_back();
  report(posterior, slice.memory, pool_, slice.time, settling_.detail, settled_.back());
}

}  // namespace steelyard::engine
