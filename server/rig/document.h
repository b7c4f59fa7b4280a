// SPDX-License-Identifier: Apache-2.0
// YAML (and with it JSON) as a tree in which everything knows its position. Takes the plain part of YAML that
// a description needs: one document of maps, lists and scalars; no aliases, tags or keys given twice.
#pragma once

#include <cstddef>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "rig/problems.h"

namespace steelyard::rig {

inline constexpr std::size_t kMaxTextBytes = std::size_t{1} << 20;
inline constexpr std::size_t kMaxDepth = 16;

struct Node {
  enum class Kind { kEmpty, kScalar, kList, kMap };
  Kind kind = Kind::kEmpty;
  Place at;         ///< where the value begins
  std::string key;  ///< under which it stands in its map
  Place key_at;
  std::string text;         ///< of a scalar
  bool quoted = false;      ///< a scalar in quotes or as a block: always text
  std::vector<Node> items;  ///< of a list or a map

  [[nodiscard]] bool is_map() const { return kind == Kind::kMap; }
  [[nodiscard]] bool is_list() const { return kind == Kind::kList; }
  [[nodiscard]] bool is_scalar() const { return kind == Kind::kScalar; }
  /// The entry of a map, or null.
  [[nodiscard]] const Node* find(std::string_view wanted) const;
};

/// The tree of a text without byte order mark, whose top is a map, or nullopt with the reasons added to
/// `problems`. Never throws for anything in `text`; time and memory are bounded by kMaxTextBytes, recursion
/// by kMaxDepth.
[[nodiscard]] std::optional<Node> parse_document(std::string_view text, Problems& problems);

/// Some editors begin a file with one; positions count from behind it.
[[nodiscard]] std::string_view without_byte_order_mark(std::string_view text);

/// Whether the text is a JSON object, as a message is printed: maps of a message have no order.
[[nodiscard]] bool is_json(std::string_view text);

}  // namespace steelyard::rig
