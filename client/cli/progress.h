// SPDX-License-Identifier: Apache-2.0
// A progress bar on stderr, on a terminal only, and messages that do not tear it.
#pragma once

#include <cstdint>
#include <string>

#include "lib/clock.h"

namespace steelyard::client {

class Progress {
 public:
  /// `total` 0: not known, no bar.
  Progress(std::string what, std::uint64_t total);
  ~Progress();
  Progress(const Progress&) = delete;
  Progress& operator=(const Progress&) = delete;

  /// Redraws at most ten times a second.
  void show(std::uint64_t done);
  /// A line on stderr.
  void say(const std::string& line);

 private:
  void clear();

  std::string what_;
  std::uint64_t total_;
  bool on_;
  bool drawn_ = false;
  SteadyTime next_{};
};

}  // namespace steelyard::client
