// SPDX-License-Identifier: Apache-2.0
// What happened to the channels, told from a sequence of estimates: a line each time the leading condition of
// a channel changes, and at the end the stretches in which a channel was not sound. Display only: the most
// probable condition is named, and nothing is decided by it.
//
//   Stretches stretches(names, units, response_ns);
//   for (each moment) stretches.add(time_ns, views, words, on_change);
//   write(stretches.finish());
//
// Chatter is joined: what turns sound for less than `join` counts as one stretch. That a channel is no longer
// sound is told when it has lasted for a fifth of `join`; a change to another condition, or back to sound,
// for all of it (between creeping, offset and wandering for five times as long). The time told is that of the
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

namespace steelyard::client {

/// The conditions of the engine and, behind them, silence.
inline constexpr int kKinds = engine::kConditions + 1;
inline constexpr int kSoundKind = 0;
inline constexpr int kSilentKind = engine::kConditions;

/// "sound", "creeping", …, "silent".
[[nodiscard]] const char* kind_name(int kind);

/// What one estimate says of one channel.
struct ChannelView {
  std::array<double, engine::kConditions> probability{};
  double silent = 0.0;
  double offset = 0.0;
  double offset_sd = 0.0;
};
[[nodiscard]] ChannelView view_of(const engine::ChannelEstimate& channel);
/// Silence where that is more probable than not, else the most probable condition.
[[nodiscard]] int leading_kind(const ChannelView& view);

/// A change of the leading condition.
struct Change {
  engine::TimeNs time_ns = 0;
  int channel = 0;
  int kind = kSoundKind;
  std::string words;  ///< what, size with uncertainty, how sure
};

/// A time in which a channel was not sound.
struct Stretch {
  int channel = 0;
  engine::TimeNs from_ns = 0;
  engine::TimeNs to_ns = 0;
  bool open = false;         ///< it still lasted at the last estimate
  bool brief = false;        ///< over within a fifth of `join`
  int kind = kSoundKind;     ///< which led for most of it, weighted by its probability
  double probability = 0.0;  ///< the highest that this kind had
  double unsound = 0.0;      ///< the highest P(not sound, or silent)
  bool has_size = false;     ///< only the kinds with an offset have one
  double size = 0.0;         ///< the largest offset while the kind was (nearly) as probable as ever
  double size_sd = 0.0;
};

class Stretches {
 public:
  /// Stretches that are kept; beyond it the later ones are only counted.
  static constexpr std::size_t kMost = 10000;
  /// Describes a channel as it is at the time of the call.
  using Words = std::function<std::string(int channel)>;
  using OnChange = std::function<void(const Change&)>;

  Stretches(std::size_t channels, engine::TimeNs join_ns);

  /// Times must not fall (one that does is ignored).
  void add(engine::TimeNs time_ns, std::span<const ChannelView> channels, const Words& words,
           const OnChange& on_change);
  /// All stretches by the time of their beginning; the open ones end at the last estimate.
  [[nodiscard]] std::vector<Stretch> finish();
  [[nodiscard]] std::uint64_t left_out() const { return left_out_; }

 private:
  struct KindSeen {
    double weight_s = 0.0;
    double probability = 0.0;
    double size = 0.0;
    double size_sd = 0.0;
  };
  struct Channel {
    int told = kSoundKind;
    int waiting = kSoundKind;  // a kind that may be told when it has lasted
    engine::TimeNs waiting_since_ns = 0;
    bool in_stretch = false;
    bool sound_since = false;  // within a stretch: sound at present, from `to_ns` on
    engine::TimeNs from_ns = 0;
    engine::TimeNs to_ns = 0;
    double unsound = 0.0;
    std::array<KindSeen, kKinds> kinds{};
  };

  void tell(engine::TimeNs time_ns, int channel, int kind, const Words& words, const OnChange& on_change);
  void follow(engine::TimeNs time_ns, int channel, const ChannelView& view);
  void see(Channel& one, int kind, const ChannelView& view, double step_s);
  void close(int channel, bool open);

  std::vector<Channel> channels_;
  engine::TimeNs join_ns_;
  std::optional<engine::TimeNs> last_ns_;
  std::vector<Stretch> done_;
  std::uint64_t left_out_ = 0;
};

/// The summary for people: a line for each stretch, and one a channel for the number of its brief ones.
/// `time` writes a time.
[[nodiscard]] std::string stretches_text(const std::vector<Stretch>& stretches, std::uint64_t left_out,
                                         std::span<const std::string> names,
                                         std::span<const std::string> units,
                                         const std::function<std::string(engine::TimeNs)>& time);

}  // namespace steelyard::client
