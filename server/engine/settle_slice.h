// SPDX-License-Identifier: Apache-2.0
// What a settler keeps of one time: the hypotheses as filtered with all readings of that time, how each had
// moved there from the time before, and from which of that time's hypotheses its weight came.
#pragma once

#include <array>
#include <cstddef>
#include <vector>

#include "engine/posterior.h"

namespace steelyard::engine {

/// One hypothesis without storage of its own.
struct Kept {
  Conditions conditions;
  Mode mode = Mode::kUsual;
  int dim = 0;
  std::array<std::int16_t, kMaxChannels> own_at{};
  double weight = 0.0;
  std::size_t at = 0;  ///< in Slice::moments: mean, then covariance (dim × dim)
};

/// How Gaussians of hypotheses with these conditions moved, in this machine mode, to a slice's time.
struct Move {
  Conditions conditions;
  Mode mode = Mode::kUsual;
  int dim = 0;
  std::size_t transition = 0;  ///< in Slice::paths: core × core
  std::size_t shift = 0;       ///< dim: shift of the core, then factors of the rest that everyone carries
  std::size_t noise = 0;       ///< core × core, then that of the numbers behind Layout::fixed
};

/// A share of a hypothesis's weight, and the hypothesis of the slice before from which it came.
struct Share {
  int ancestor = 0;
  double of_weight = 0.0;
  std::ptrdiff_t kernel = -1;  ///< in Slice::kernels; −1: not needed yet
};

struct Slice {
  TimeNs time = 0;
  bool read = false;          ///< a channel was read at this time: an estimate is wanted
  double gap_s = 0.0;         ///< since the slice before
  unsigned inputs_reset = 0;  ///< bit i: input i was given a value at this time, independent of what was
  std::vector<Kept> kept;
  std::vector<int> first_share;  ///< of each hypothesis in `shares`, and the end
  std::vector<Share> shares;
  std::vector<Move> moves;
  std::vector<double> moments;
  std::vector<double> learned;   ///< of all hypotheses, `learned_each` numbers each
  std::size_t learned_each = 0;  ///< Pool::learned_size
  std::vector<double> paths;
  std::vector<double> kernels;  ///< see settle_kernel.h; filled as they are needed
  std::vector<double> walks;  ///< density of a channel's own number by condition and part, for changed walks
  Memory memory;

  /// Forgets the contents, keeps the storage.
  void clear();
  [[nodiscard]] std::size_t bytes() const;
  /// Takes over what has been filtered; the hypotheses' lineages become the shares.
  void keep(const Posterior& posterior);
  /// Takes over what a prediction did; `shadows` and `transitions` as Trails has them.
  void keep_moves(const Pool& shadows, const std::vector<CoreMatrix>& transitions, const Walks& walks,
                  const Layout& layout);
  [[nodiscard]] const Move* move_of(Conditions conditions, Mode mode) const;
};

/// Hypotheses that start from nothing and move like those that are predicted: what they end with is the way.
class Trails {
 public:
  Trails(const Layout& layout, int capacity) : layout_(layout), shadows_(layout, capacity) {}

  /// One shadow for each hypothesis of `pool`, in its order.
  void start(const Pool& pool);
  /// The trail of the group that begins there in that pool.
  [[nodiscard]] Trail of_group(int begin, int end);
  [[nodiscard]] const Pool& shadows() const { return shadows_; }
  /// By the index at which a group begins.
  [[nodiscard]] const std::vector<CoreMatrix>& transitions() const { return transitions_; }

 private:
  const Layout& layout_;
  Pool shadows_;
  std::vector<CoreMatrix> transitions_;
};

/// Gives every hypothesis itself as its only ancestor.
void restart_lineages(Pool& pool, const Layout& layout);

}  // namespace steelyard::engine
