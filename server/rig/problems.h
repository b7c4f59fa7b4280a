// SPDX-License-Identifier: Apache-2.0
// Collects what is wrong with a description, wherever it is found, and hands it out in the order of the text.
#pragma once

#include <cstddef>
#include <string>
#include <string_view>
#include <vector>

#include "rig/rig.h"

namespace steelyard::rig {

/// A position in the text. Both count from 1; the column counts bytes (Problem counts characters).
struct Place {
  int line = 0;
  int column = 0;
};

class Problems {
 public:
  /// `text` must outlive this object.
  Problems(std::string_view file, std::string_view text);

  void add(Place at, std::string_view field, std::string message);
  [[nodiscard]] bool empty() const { return found_.empty(); }
  /// More would not help anybody: callers may stop looking. add() drops what comes after.
  [[nodiscard]] bool full() const { return found_.size() >= kMaxFound; }
  /// Sorted by position; a last one says so if there were too many.
  [[nodiscard]] std::vector<Problem> take();

 private:
  static constexpr std::size_t kMaxFound = 1000;
  static constexpr std::size_t kMaxListed = 100;
  [[nodiscard]] std::vector<std::size_t> line_starts() const;
  void count_characters(std::vector<Problem>& listed) const;

  std::string file_;
  std::string_view text_;
  std::vector<Problem> found_;
};

/// Text of the description as it may stand in a message: short, without control characters.
[[nodiscard]] std::string shown(std::string_view text);

/// `parent`.`key`, or `key` alone at the top.
[[nodiscard]] std::string join(std::string_view parent, std::string_view key);

}  // namespace steelyard::rig
