// SPDX-License-Identifier: Apache-2.0
// Copying filtered hypotheses and their ways into compact storage. Checked in tests/engine/settle_test.cc.
#include "engine/settle_slice.h"

#include <algorithm>
#include <cmath>

namespace steelyard::engine {
namespace {

constexpr double kLeastShare = 1e-12;  // of a hypothesis's weight; less is no ancestor

template <typename T>
std::size_t bytes_of(const std::vector<T>& v) {
  return v.capacity() * sizeof(T);
}

std::size_t append(std::vector<double>& to, const double* from, std::size_t count) {
  const std::size_t at = to.size();
  to.insert(to.end(), from, from + count);
  return at;
}

void append_shares(const Hypothesis& h, int width, std::vector<Share>& out) {
  double sum = 0.0;
  for (int i = 0; i < width; ++i)
    if (h.lineage[i] > kLeastShare) sum += h.lineage[i];
  for (int i = 0; i < width; ++i)
    if (h.lineage[i] > kLeastShare) out.push_back({i, h.lineage[i] / sum, -1});
}

}  // namespace

void Slice::clear() {
  read = false;
  inputs_reset = 0;
  kept.clear();
  first_share.clear();
  shares.clear();
  moves.clear();
  moments.clear();
  learned.clear();
  paths.clear();
  kernels.clear();
  walks.clear();
}

std::size_t Slice::bytes() const {
  return bytes_of(kept) + bytes_of(first_share) + bytes_of(shares) + bytes_of(moves) + bytes_of(moments) +
         bytes_of(learned) + bytes_of(paths) + bytes_of(kernels) + bytes_of(walks) +
         bytes_of(memory.channels);
}

void Slice::keep(const Posterior& posterior) {
  const Pool& pool = posterior.now;
  time = posterior.predicted_to;
  memory = posterior;
  learned_each = pool.learned_size();
  for (int i = 0; i < pool.size(); ++i) {
    const Hypothesis& h = pool[i];
    const auto dim = static_cast<std::size_t>(h.dim);
    const std::size_t at = append(moments, h.mean, dim);
    append(moments, h.cov, dim * dim);
    append(learned, reinterpret_cast<const double*>(h.noise), pool.learned_size());
    kept.push_back({h.conditions, h.mode, h.dim, h.own_at, std::exp(h.log_weight), at});
    first_share.push_back(static_cast<int>(shares.size()));
    append_shares(h, posterior.layout.lineage, shares);
  }
  first_share.push_back(static_cast<int>(shares.size()));
}

void Slice::keep_moves(const Pool& shadows, const std::vector<CoreMatrix>& transitions, const Walks& by,
                       const Layout& layout) {
  const auto core = static_cast<std::size_t>(layout.core);
  for (int begin = 0; begin < shadows.size(); begin = shadows.group_end(begin)) {
    const std::size_t transition =
        append(paths, transitions[static_cast<std::size_t>(begin)].data(), core * core);
    for (int i = begin; i < shadows.group_end(begin); ++i) {
      const Hypothesis& h = shadows[i];
      const auto dim = static_cast<std::size_t>(h.dim);
      const std::size_t shift = append(paths, h.mean, dim);
      // Between the core and the channels' own numbers stands what has no noise of its own.
      const std::size_t noise = paths.size();
      for (int r = 0; r < layout.core; ++r) append(paths, h.cov + r * h.dim, core);
      for (int r = layout.fixed; r < h.dim; ++r)
        append(paths, h.cov + r * h.dim + layout.fixed, static_cast<std::size_t>(h.dim - layout.fixed));
      moves.push_back({h.conditions, h.mode, h.dim, transition, shift, noise});
    }
  }
  for (const auto& row : by.own) append(walks, row.data(), row.size());
}

const Move* Slice::move_of(Conditions conditions, Mode mode) const {
  const auto found = std::find_if(moves.begin(), moves.end(), [&](const Move& m) {
    return m.mode == mode && m.conditions == conditions;
  });
  return found == moves.end() ? nullptr : &*found;
}

void Trails::start(const Pool& pool) {
  shadows_.clear();
  const auto core = static_cast<Eigen::Index>(layout_.core);
  transitions_.resize(static_cast<std::size_t>(pool.size()));
  for (auto& t : transitions_) t = CoreMatrix::Identity(core, core);
  for (int i = 0; i < pool.size(); ++i) {
    Hypothesis& h = shadows_.append_copy(pool[i]);
    std::fill_n(h.mean, h.dim, 0.0);
    std::fill_n(h.cov, h.dim * h.dim, 0.0);
    // What everyone carries besides the core keeps a share of itself: of one, that share is what is left.
    std::fill(h.mean + layout_.core, h.mean + layout_.fixed, 1.0);
  }
}

Trail Trails::of_group(int begin, int end) {
  return {shadows_.slice(begin, end), &transitions_[static_cast<std::size_t>(begin)]};
}

void restart_lineages(Pool& pool, const Layout& layout) {
  for (int i = 0; i < pool.size(); ++i) {
    std::fill_n(pool[i].lineage, layout.lineage, 0.0);
    pool[i].lineage[i] = 1.0;
  }
}

}  // namespace steelyard::engine
