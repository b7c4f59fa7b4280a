// SPDX-License-Identifier: Apache-2.0
// Readings as they come off the wire: checked for their form, not yet for the rig.
#pragma once

#include <grpcpp/support/status.h>

#include <cstdint>
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
  double value = 0.0;
};

/// Columns into rows. INVALID_ARGUMENT (and `rows` without meaning) if the columns do not fit together, are
/// too long, or a number runs over.
[[nodiscard]] grpc::Status to_rows(const v1::Batch& batch, const Limits& limits, std::vector<Row>& rows);
[[nodiscard]] grpc::Status to_rows(const v1::Reading& reading, std::vector<Row>& rows);

}  // namespace steelyard::service
