// SPDX-License-Identifier: Apache-2.0
// One hypothesis: a condition for every channel and a machine mode, a Gaussian over the state and the offsets
// that those conditions need, and Gammas of its own. Stored in a pool whose memory is taken once.
//
// The Gaussian's vector z is [states | inputs | biases | offsets]. Offsets stand in the order of their
// channels, so hypotheses with equal conditions have equal layouts and can be merged element by element.
#pragma once

#include <array>
#include <cstdint>
#include <span>
#include <vector>

#include "engine/gamma.h"
#include "engine/model.h"

namespace steelyard::engine {

/// Where things stand in z, the same for all hypotheses of a model.
struct Layout {
  explicit Layout(const Model& model, bool with_lineage = false);
  int states = 0;
  int core = 0;   ///< states + inputs: what moves by the machine's law
  int fixed = 0;  ///< core + biases + correlated noises: what every hypothesis carries
  int channels = 0;
  int parts = 0;                               ///< of all channels together
  int max_dim = 0;                             ///< fixed + 2 · parts
  int lineage = 0;                             ///< numbers in a hypothesis's lineage; 0: not kept
  int shape_size = 0;                          ///< numbers in a hypothesis's shapes
  std::array<int, kMaxChannels> first_part{};  ///< of a channel, among the parts of all channels
  std::array<int, kMaxChannels> part_count{};
  std::array<int, kMaxParts> bias_at{};       ///< index in z of a part's standing bias, −1: none
  std::array<int, kMaxChannels> colour_at{};  ///< index in z of a channel's correlated noise, −1: none
  std::array<int, kMaxChannels> shape_at{};  ///< where a vector channel's shape begins, −1: a scalar channel
};

/// Four bits a channel: the conditions of all channels, cheap to compare.
class Conditions {
 public:
  [[nodiscard]] Condition of(int channel) const {
    const auto c = static_cast<unsigned>(channel);
    return static_cast<Condition>((word_[c / 16] >> (4 * (c % 16))) & 15U);
  }
  void set(int channel, Condition condition) {
    const auto c = static_cast<unsigned>(channel);
    const unsigned shift = 4 * (c % 16);
    word_[c / 16] = (word_[c / 16] & ~(std::uint64_t{15} << shift)) | (std::uint64_t(condition) << shift);
  }
  bool operator==(const Conditions& o) const { return word_[0] == o.word_[0] && word_[1] == o.word_[1]; }
  bool operator<(const Conditions& o) const {
    return word_[1] != o.word_[1] ? word_[1] < o.word_[1] : word_[0] < o.word_[0];
  }

 private:
  std::array<std::uint64_t, kMaxChannels / 16> word_{};
};

[[nodiscard]] constexpr bool is_walk(Condition c) {
  return c == Condition::kCreeping || c == Condition::kOffset || c == Condition::kWandering;
}
/// A creeping channel's offset has a rate of its own, so that a steady drift costs nothing to explain.
[[nodiscard]] constexpr bool has_rate(Condition c) { return c == Condition::kCreeping; }
/// The walks of these two have a speed that is learned; a creeping offset moves by its rate.
[[nodiscard]] constexpr bool learns_speed(Condition c) {
  return c == Condition::kOffset || c == Condition::kWandering;
}
/// Does a channel in this condition carry a number of its own in z (an offset, or a stuck level)?
[[nodiscard]] constexpr bool has_own(Condition c) { return is_walk(c) || c == Condition::kStuck; }

/// Most elements of z: core, biases and two numbers a part, correlated noises.
inline constexpr int kMaxDim = kMaxStates + kMaxInputs + 3 * kMaxParts + kMaxChannels;

/// How the channels' own numbers move by themselves, in the channels' units; by part.
struct Walks {
  std::array<std::array<double, kMaxParts>, kConditions> own{};  ///< spectral density, unit²/s
  std::array<double, kMaxParts> rate{};                          ///< of a creeping part's rate, (unit/s)²/s
  std::array<double, kMaxParts> first_rate{};  ///< variance of that rate at its birth, (unit/s)²
};

struct Hypothesis {
  double log_weight = 0.0;
  Conditions conditions;
  Mode mode = Mode::kUsual;
  int dim = 0;
  /// Index in z of a channel's own numbers (one a part, then their rates if they have any), −1: none.
  std::array<std::int16_t, kMaxChannels> own_at{};
  double* mean = nullptr;   ///< dim
  double* cov = nullptr;    ///< dim × dim, row-major, full and symmetric
  Gamma* noise = nullptr;   ///< by channel: relative precision κ; of a vector channel 2a is Wishart's ν
  Gamma* walk = nullptr;    ///< by channel: precision of the offset's walk, relative to its condition's speed
  double* since = nullptr;  ///< by channel: mean time in s at which it stopped being sound; unused if it is
  double* lineage =
      nullptr;  ///< share of the weight that came from each hypothesis of the last slice (settle.h)
  double* shape = nullptr;  ///< of vector channels: mean relative precision, parts × parts (Layout::shape_at)

  [[nodiscard]] double& p(int i, int k) { return cov[i * dim + k]; }
  [[nodiscard]] double p(int i, int k) const { return cov[i * dim + k]; }
  /// Same conditions and mode: can be merged.
  [[nodiscard]] bool same_key(const Hypothesis& other) const {
    return mode == other.mode && conditions == other.conditions;
  }
};

/// Hypotheses with storage of their own for up to `capacity` of them. A copy is independent.
class Pool {
 public:
  Pool(const Layout& layout, int capacity);
  Pool(const Pool& other);
  Pool& operator=(const Pool& other);
  Pool(Pool&&) noexcept = default;
  Pool& operator=(Pool&&) noexcept = default;
  ~Pool() = default;

  [[nodiscard]] int size() const { return size_; }
  [[nodiscard]] int capacity() const { return static_cast<int>(items_.size()); }
  [[nodiscard]] Hypothesis& operator[](int i) { return items_[static_cast<std::size_t>(i)]; }
  [[nodiscard]] const Hypothesis& operator[](int i) const { return items_[static_cast<std::size_t>(i)]; }
  [[nodiscard]] std::span<Hypothesis> slice(int begin, int end) {
    return {items_.data() + begin, static_cast<std::size_t>(end - begin)};
  }
  /// Appends a hypothesis with unspecified contents; size() < capacity().
  Hypothesis& append();
  Hypothesis& append_copy(const Hypothesis& from);
  void clear() { size_ = 0; }
  void shrink(int size) { size_ = size; }
  /// Numbers, from `noise` on, that a hypothesis has besides its moments and its lineage.
  [[nodiscard]] std::size_t learned_size() const { return learned_size_; }
  void swap_items(int i, int k);
  /// End of the run of equal conditions that begins at `begin`; the pool must be in the order of keys.
  [[nodiscard]] int group_end(int begin) const;
  /// Copies a hypothesis of the same layout into one of this pool.
  void assign(Hypothesis& to, const Hypothesis& from) const;

 private:
  void point_into_storage();
  std::size_t channels_ = 0;
  std::size_t mean_size_ = 0;
  std::size_t cov_size_ = 0;
  std::size_t learned_size_ = 0;  ///< noise, walk, since, shape
  std::size_t lineage_size_ = 0;
  std::size_t block_ = 0;  ///< doubles a hypothesis: mean, cov, learned
  int size_ = 0;
  std::vector<double> storage_;
  std::vector<Hypothesis> items_;
  std::vector<std::size_t> block_of_;  ///< which block of storage_ items_[i] uses
};

/// Makes room in z for a channel's own numbers and returns the index of the first; they are all zero, with
/// zero covariances. The channel must not have any yet.
int add_own(Hypothesis& h, int channel, int count);
/// One number with the given moments; `cross` has its covariance with the old z (dim entries).
void add_own(Hypothesis& h, int channel, double mean, double variance, const double* cross);
/// Gives each of the channel's `parts` own numbers a rate, behind them in z, with mean 0 and independent of
/// the rest; variance by part.
void add_rate(Hypothesis& h, int channel, std::span<const double> variance);
void drop_rate(Hypothesis& h, int channel, int parts);
/// Takes all of a channel's own numbers out of z (marginalises them).
void drop_own(Hypothesis& h, int channel);

/// Moment-matched merge of `from` into `into` (same key); weights add up.
void merge(Hypothesis& into, const Hypothesis& from, const Layout& layout);

}  // namespace steelyard::engine
