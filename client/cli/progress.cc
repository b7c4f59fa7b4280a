// SPDX-License-Identifier: Apache-2.0
// Drawing of the bar.
#include "cli/progress.h"

#include <unistd.h>

#include <algorithm>
#include <cstdio>
#include <utility>

namespace steelyard::client {

Progress::Progress(std::string what, std::uint64_t total)
    : what_(std::move(what)), total_(total), on_(total > 0 && ::isatty(STDERR_FILENO) == 1) {}

Progress::~Progress() { clear(); }

void Progress::show(std::uint64_t done) {
  if (!on_) return;
  const SteadyTime now = steady_now();
  if (now < next_) return;
  next_ = now + std::chrono::milliseconds(100);
  constexpr std::uint64_t kWidth = 40;
  const std::uint64_t percent = std::min<std::uint64_t>(done * 100 / total_, 100);
  const auto full = static_cast<std::size_t>(percent * kWidth / 100);
  const std::string bar = std::string(full, '=') + std::string(kWidth - full, '.');
  std::fprintf(stderr, "\r%s %s %3d %%", what_.c_str(), bar.c_str(), static_cast<int>(percent));
  std::fflush(stderr);
  drawn_ = true;
}

void Progress::say(const std::string& line) {
  clear();
  std::fprintf(stderr, "%s\n", line.c_str());
}

void Progress::clear() {
  if (!drawn_) return;
  std::fputs("\r\x1b[K", stderr);
  drawn_ = false;
}

}  // namespace steelyard::client
