// SPDX-License-Identifier: Apache-2.0
// Any bytes as a batch of readings: refused with a message, or rows within the limits.
#include <cstddef>
#include <cstdint>
#include <cstdlib>
#include <vector>

#include "service/rows.h"

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size) {
  steelyard::v1::Batch batch;
  if (!batch.ParseFromArray(data, static_cast<int>(size))) return 0;
  const steelyard::service::Limits limits;
  std::vector<steelyard::service::Row> rows;
  const grpc::Status status = to_rows(batch, limits, rows);
  if (!status.ok() && status.error_message().empty()) std::abort();
  return 0;
}
