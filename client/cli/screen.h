// SPDX-License-Identifier: Apache-2.0
// The picture that watch shows in a terminal: the estimate with error bars, for each channel a bar of trust
// and what is the matter in words, and where a channel is not sound the explanations with their
// probabilities. Colour only repeats what bars and words say.
#pragma once

#include <string>
#include <vector>

#include "cli/bridge.h"

namespace steelyard::client {

struct ScreenSize {
  std::size_t columns = 80;
  std::size_t rows = 24;
};
/// Of the terminal at stdout; 80 × 24 if it does not tell.
[[nodiscard]] ScreenSize terminal_size();

/// Draws pictures; holds the spans over which the states have moved, which scale the error bars.
class Screen {
 public:
  explicit Screen(bool colour) : colour_(colour) {}

  /// Lines to print, none wider than the screen, at most as many as it has rows. No cursor movements in them.
  [[nodiscard]] std::vector<std::string> draw(const Picture& picture, ScreenSize size);

 private:
  struct Span {
    double lo = 0.0;
    double hi = 0.0;
    bool any = false;
  };
  std::string state_line(const Picture& picture, std::size_t state, std::size_t name_width);
  std::vector<std::string> channel_lines(const Picture& picture, std::size_t channel, std::size_t name_width,
                                         std::size_t columns);

  bool colour_;
  std::vector<Span> spans_;
};

}  // namespace steelyard::client
