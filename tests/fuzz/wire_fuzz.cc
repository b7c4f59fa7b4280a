// SPDX-License-Identifier: Apache-2.0
// Any bytes as a batch of readings: refused with a message, or rows within the limits.
#include <array>
#include <cstddef>
#include <cstdint>
#include <cstdlib>
#include <vector>

#include "service/rows.h"

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size) {
  steelyard::v1::Batch batch;
  if (!batch.ParseFromArray(data, static_cast<int>(size))) return 0;
  const steelyard::service::Limits limits;
  steelyard::service::Rows rows;
  const grpc::Status status = to_rows(batch, limits, rows);
  if (!status.ok() && status.error_message().empty()) std::abort();
  if (!status.ok()) return 0;
  const std::array<std::uint32_t, 4> parts{1, 2, 3, 32};
  if (share_out(rows, parts) != rows.more_values.size()) return 0;
  for (const steelyard::service::Row& row : rows.rows)
    if (row.more_at + row.more_count > rows.more_values.size()) std::abort();
  return 0;
}
