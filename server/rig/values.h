// SPDX-License-Identifier: Apache-2.0
// Reads values out of the tree: each function reports what is wrong with its value and returns nullopt then.
#pragma once

#include <limits>
#include <optional>
#include <span>
#include <string>
#include <string_view>

#include "rig/document.h"
#include "rig/problems.h"

namespace steelyard::rig {

/// A value and the path under which messages name it.
struct Item {
  const Node* node = nullptr;
  std::string path;

  /// Of the value, or of its key where there is no value.
  [[nodiscard]] Place place() const { return node->kind == Node::Kind::kEmpty ? node->key_at : node->at; }
};

/// The keys of one map. Reports at once what is no map, and unknown keys.
class Fields {
 public:
  Fields(const Item& map, std::span<const std::string_view> known, Problems& problems);

  [[nodiscard]] std::optional<Item> optional(std::string_view key) const;
  /// Reports it where the key is missing.
  [[nodiscard]] std::optional<Item> required(std::string_view key) const;

 private:
  Item map_;
  Problems& problems_;
};

/// Numbers that a key may have.
struct Limit {
  double lo = -std::numeric_limits<double>::infinity();
  double hi = std::numeric_limits<double>::infinity();
  bool with_lo = false;  ///< lo itself is allowed
  bool with_hi = false;
  [[nodiscard]] bool allows(double value) const;
  [[nodiscard]] std::string rule() const;  ///< "greater than 0", or empty
};
[[nodiscard]] constexpr Limit any_number() { return {}; }
[[nodiscard]] constexpr Limit above(double lo) { return {.lo = lo}; }
[[nodiscard]] constexpr Limit at_least(double lo) { return {.lo = lo, .with_lo = true}; }
[[nodiscard]] constexpr Limit between(double lo, double hi) { return {.lo = lo, .hi = hi}; }
[[nodiscard]] constexpr Limit at_least_and_below(double lo, double hi) {
  return {.lo = lo, .hi = hi, .with_lo = true};
}
[[nodiscard]] constexpr Limit from_to(double lo, double hi) {
  return {.lo = lo, .hi = hi, .with_lo = true, .with_hi = true};
}

struct Range {
  double lo = 0.0;
  double hi = 0.0;
};

[[nodiscard]] std::optional<double> read_number(const Item& item, const Limit& limit, Problems& problems);
/// Seconds, greater than 0 (or 0, if allowed), at most 100 years, so that nanoseconds fit in 64 bits.
enum class Zero { kRefused, kAllowed };
[[nodiscard]] std::optional<double> read_duration_s(const Item& item, Problems& problems,
                                                    Zero zero = Zero::kRefused);
/// Text without control characters, at most 500 bytes.
[[nodiscard]] std::optional<std::string> read_text(const Item& item, Problems& problems);
/// [lo, hi] with lo < hi.
[[nodiscard]] std::optional<Range> read_range(const Item& item, Problems& problems);

/// The value as messages show it: "-0.01", "a list", "a map", "empty".
[[nodiscard]] std::string described(const Node& node);
/// Reports "is VALUE; must be RULE".
void report_rule(const Item& item, std::string_view rule, Problems& problems);

}  // namespace steelyard::rig
