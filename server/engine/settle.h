// SPDX-License-Identifier: Apache-2.0
// Settled estimates: what a moment looks like once the readings of the next `lag` are known. A fixed-lag
// smoother over the whole mixture: after Kim (1994, Journal of Econometrics 60:1) the weights go back by the
// shares in which each hypothesis's weight came from those of the slice before, and each such pair's Gaussian
// by a step of Rauch, Tung & Striebel (1965). engine.md §8.
#pragma once

#include <deque>
#include <vector>

#include "engine/settle_evidence.h"
#include "engine/settle_kernel.h"
#include "engine/settle_slice.h"

namespace steelyard::engine {

/// Owned by a Posterior, which tells it what happens. Used by that posterior's thread.
class Settler {
 public:
  Settler(const Posterior& posterior, Settling settling);

  /// A channel was read at the present time.
  void reading() { open_.read = true; }
  /// Input i was given a value at the present time.
  void input_reset(int input) { open_.inputs_reset |= 1U << static_cast<unsigned>(input); }
  /// All readings of the present time are in; the machine moves on to `next`. Settles what no reading from
  /// there on may touch, and restarts the posterior's lineages.
  void close(Posterior& posterior, TimeNs next);
  /// The posterior has moved to `to`.
  void moved(TimeNs from, TimeNs to, const Walks& walks);
  /// Settles all that is left with what there is.
  void finish(Posterior& posterior);

  [[nodiscard]] Trails& trails() { return trails_; }
  [[nodiscard]] std::int64_t early() const { return early_; }

 private:
  /// Smoothed moments of a slice's hypotheses, laid out as in Slice::moments.
  struct Smoothed {
    std::vector<double> weight;
    std::vector<double>
        mixed;  ///< part of the weight that has been smoothed; where it is 0 there are no moments
    std::vector<double> moments;
  };
  void store(const Posterior& posterior);
  [[nodiscard]] int due(TimeNs next) const;
  [[nodiscard]] bool beyond_limits() const;
  void settle(const Posterior& posterior, int count);
  void step(const Slice& before, Slice& after);
  [[nodiscard]] static int group_end(const Slice& before, const Slice& after, int begin, int last);
  void step_group(const Slice& before, Slice& after, int k, int begin, int end);
  void find_kernels(const Slice& before, Slice& after, int k, std::span<Share> shares);
  void mix(const Slice& before, int i, double weight);
  void estimate(const Posterior& posterior, const Slice& slice);
  void drop_oldest(int count);

  const Layout& layout_;
  Settling settling_;
  std::int64_t early_ = 0;
  KernelMaker kernels_;
  Evidence evidence_;
  Trails trails_;
  std::deque<Slice> window_;  ///< oldest first, all within the lag of the oldest
  std::vector<Slice> spare_;
  Slice open_;  ///< of the present time
  Smoothed now_;
  Smoothed past_;
  std::vector<Kernel> group_;  ///< of the shares that are looked at
  std::vector<Prospect> prospects_;
  std::vector<double> weights_;  ///< theirs
  std::vector<double> pair_;     ///< one pair's moments
  std::vector<double> scratch_;
  Pool pool_;  ///< smoothed hypotheses of the slice that is reported
  std::vector<Estimate> settled_;
};

}  // namespace steelyard::engine
