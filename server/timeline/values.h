// SPDX-License-Identifier: Apache-2.0
// The values of one reading: one for each part of its channel. Of a fixed size, so that no reading allocates.
#pragma once

#include <array>
#include <cstddef>
#include <span>

#include "engine/model.h"

namespace steelyard::timeline {

class Values {
 public:
  static constexpr std::size_t kMost = static_cast<std::size_t>(engine::kMaxParts);

  /// One part, 0.
  Values() = default;
  /// One part. Implicit, because nearly all channels have one.
  Values(double value) { values_[0] = value; }  // NOLINT(google-explicit-constructor)
  /// At most kMost values; what is beyond is left out.
  explicit Values(std::span<const double> values) : count_(0) {
    for (const double value : values) add(value);
  }

  /// False, and nothing added, if there is no room.
  bool add(double value) {
    if (count_ == kMost) return false;
    values_[count_++] = value;
    return true;
  }

  [[nodiscard]] std::size_t size() const { return count_; }
  [[nodiscard]] double first() const { return values_[0]; }
  [[nodiscard]] std::span<const double> all() const { return {values_.data(), count_}; }

 private:
  std::array<double, kMost> values_{};
  std::size_t count_ = 1;
};

}  // namespace steelyard::timeline
