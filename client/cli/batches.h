// SPDX-License-Identifier: Apache-2.0
// What feed says of itself and of its readings on the wire.
#pragma once

#include <cstddef>
#include <cstdint>
#include <string>
#include <vector>

#include "engine/model.h"
#include "lib/client.h"
#include "timeline/timeline.h"

namespace steelyard::client {

inline constexpr std::size_t kMostSourceBytes = 255;

/// The file's name and a hash of its first 4 KiB: the same log is the same source, another one of that name
/// is not.
[[nodiscard]] std::string default_source(const std::string& log);

/// The opening's table: inputs first, then channels, in the rig's order.
[[nodiscard]] std::vector<std::string> channel_table(const engine::Model& model);

/// Collects readings for one batch. Sequences must rise by one.
class BatchMaker {
 public:
  /// The service takes no more in one batch.
  static constexpr std::size_t kMostRows = 65536;
  static constexpr std::size_t kUsualRows = 1024;
  /// Values of one batch, so that it stays below gRPC's 4 MiB.
  static constexpr std::size_t kMostValues = 131072;

  /// `inputs` of the rig: what stands before the channels in the table.
  explicit BatchMaker(std::size_t inputs) : inputs_(inputs) {}

  void add(const timeline::Reading& reading);
  /// The service orders what comes in one batch, so the readings of one time stay together: a batch is full
  /// when a new time begins and it has the usual size (or holds one time, if `one_time_each`), or when it can
  /// hold no more.
  [[nodiscard]] bool full_before(const timeline::Reading& reading, bool one_time_each) const;
  [[nodiscard]] std::size_t rows() const { return static_cast<std::size_t>(batch_.value_size()); }
  [[nodiscard]] std::size_t values() const {
    return rows() + static_cast<std::size_t>(batch_.more_values_size());
  }
  [[nodiscard]] engine::TimeNs last_ns() const { return last_ns_; }
  [[nodiscard]] v1::Batch take();

 private:
  [[nodiscard]] std::uint32_t number_of(const rig::Signal& signal) const;

  std::size_t inputs_;
  v1::Batch batch_;
  engine::TimeNs last_ns_ = 0;
};

}  // namespace steelyard::client
