// SPDX-License-Identifier: Apache-2.0
// What happened to the channels, told from a sequence of estimates: a line each time the leading kind of a
// channel changes, and at the end the stretches in which a channel was not sound. Display only: the most
// probable kind is named, and nothing is decided by it.
//
//   Stretches stretches(channels, response_ns);
//   for (each moment) stretches.add(estimate, {.words = …, .on_change = …});
//   write(stretches.finish());
//
// Chatter is joined: what turns sound for less than `join` counts as one stretch. That a channel is no longer
// sound is told when it has lasted for a fifth of `join`; a change to another kind, or back to sound, for all
// of it (between creeping, offset and wandering for five times as long). The time told is that of the
// beginning.
#pragma once

#include <array>
#include <cstdint>
#include <functional>
#include <optional>
#include <span>
#include <string>
#include <vector>

#include "engine/estimate.h"
#include "timeline/kinds.h"
#include "timeline/words.h"

namespace steelyard::timeline {

/// A change of the leading kind.
struct Change {
  engine::TimeNs time_ns = 0;
  int channel = 0;
  int kind = kSoundKind;
  std::string words;  ///< what, size with its interval, how sure
};

/// How large a fault is, with its 90 % interval.
struct Size {
  double size = 0.0;
  double lo = 0.0;
  double hi = 0.0;
};

/// By part of the channel: the offset of creeping, offset and wandering, the noise of noisy, the level of
/// stuck (where the estimate has explanations); empty for what has no size.
[[nodiscard]] std::vector<Size> sizes_of(const engine::Estimate& estimate, int channel, int kind);

/// A time in which a channel was not sound.
struct Stretch {
  int channel = 0;
  engine::TimeNs from_ns = 0;  ///< when it began: as the engine came to believe, or else was seen
  engine::TimeNs to_ns = 0;
  bool open = false;         ///< it still lasted at the last estimate
  bool brief = false;        ///< over within a fifth of `join`
  int kind = kSoundKind;     ///< which led for most of it, weighted by its probability
  double probability = 0.0;  ///< the highest that this kind had
  double unsound = 0.0;      ///< the highest P(not sound, or silent)
  /// By part, those of the largest size while the kind was (nearly) as probable as ever.
  std::vector<Size> sizes;
  double then = 0.0;  ///< P(kind) at that time
  Rival rival;        ///< likewise; empty where nobody told it
};

class Stretches {
 public:
  /// Stretches that are kept; beyond it the later ones are only counted.
  static constexpr std::size_t kMost = 10000;

  /// What the follower asks and tells; all may be empty. All are about the moment of the call.
  struct Calls {
    std::function<std::string(int channel)> words{};  ///< describes a channel
    std::function<void(const Change&)> on_change{};
    /// The estimate of this moment with Detail::kFull; where empty, the one that was added will do.
    std::function<const engine::Estimate&()> full{};
    std::function<Rival(int channel)> rival{};
  };

  explicit Stretches(std::size_t channels, engine::TimeNs join_ns, std::size_t most = kMost);

  /// Times must not fall (one that does is ignored).
  void add(const engine::Estimate& estimate, const Calls& calls);
  /// Since when the channel has not been sound, short returns joined; 0: it is sound.
  [[nodiscard]] engine::TimeNs since(int channel) const;
  /// All stretches by the time of their beginning; the open ones end at the last estimate.
  [[nodiscard]] std::vector<Stretch> finish();
  [[nodiscard]] std::uint64_t left_out() const { return left_out_; }

 private:
  struct KindSeen {
    double weight_s = 0.0;
    double probability = 0.0;
    double extent = 0.0;          // of its sizes, all parts together
    engine::TimeNs since_ns = 0;  // as the engine has it
    double then = 0.0;            // P(kind) when sizes and rival were seen
    std::vector<Size> sizes;
    Rival rival;
  };
  struct Channel {
    int told = kSoundKind;
    int waiting = kSoundKind;  // a kind that may be told when it has lasted
    engine::TimeNs waiting_since_ns = 0;
    bool in_stretch = false;
    bool sound_since = false;  // within a stretch: sound at present, from `to_ns` on
    engine::TimeNs from_ns = 0;
    engine::TimeNs to_ns = 0;
    std::optional<engine::TimeNs> closed_ns;  // end of the stretch before
    double unsound = 0.0;
    std::array<KindSeen, kKinds> kinds{};
  };

  void tell(engine::TimeNs time_ns, int channel, int kind, const Calls& calls);
  void follow(const engine::Estimate& estimate, int channel, int kind, const Calls& calls);
  void see(int channel, int kind, const engine::Estimate& estimate, double step_s, const Calls& calls);
  void close(int channel, bool open);

  std::vector<Channel> channels_;
  engine::TimeNs join_ns_;
  std::size_t most_;
  std::optional<engine::TimeNs> first_ns_;
  std::optional<engine::TimeNs> last_ns_;
  std::vector<Stretch> done_;
  std::uint64_t left_out_ = 0;
};

/// The summary for people: a line for each stretch, and one a channel for the number of its brief ones.
[[nodiscard]] std::string stretches_text(const std::vector<Stretch>& stretches, std::uint64_t left_out,
                                         std::span<const std::string> names,
                                         std::span<const std::string> units, const TellTime& time);

}  // namespace steelyard::timeline
