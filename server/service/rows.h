// SPDX-License-Identifier: Apache-2.0
// Readings as they come off the wire: checked for their form, not yet for the rig.
#pragma once

#include <grpcpp/support/status.h>

#include <cstddef>
#include <cstdint>
#include <span>
#include <vector>

#include "service/limits.h"
#include "steelyard/v1/readings.pb.h"

namespace steelyard::service {

/// One reading. Quality and channel are unchecked numbers: a wrong one refuses this reading alone.
struct Row {
  std::uint64_t sequence = 0;
  std::int64_t time_ns = 0;
  std::uint32_t channel = 0;
  int quality = 0;
  double value = 0.0;         ///< of a vector channel: its first part
  std::uint32_t more_at = 0;  ///< where its further parts stand in Rows::more_values
  std::uint32_t more_count = 0;
};

/// The readings of one message.
struct Rows {
  std::vector<Row> rows;
  std::vector<double> more_values;
  /// The rows take more_values in turn, as their channels have parts: share_out() says who takes which. Else
  /// the rows have them already.
  bool in_columns = false;
};

/// Columns into rows. INVALID_ARGUMENT (and `rows` without meaning) if the columns do not fit together, are
/// too long, or a number runs over.
[[nodiscard]] grpc::Status to_rows(const v1::Batch& batch, const Limits& limits, Rows& rows);
[[nodiscard]] grpc::Status to_rows(const v1::Reading& reading, Rows& rows);

/// Gives each row of a batch its further parts; `parts` is by channel, what is beyond it has one. The number
/// of values that all rows together must have: where the message has others, nothing can be said of any row.
[[nodiscard]] std::size_t share_out(Rows& rows, std::span<const std::uint32_t> parts);

}  // namespace steelyard::service
