// SPDX-License-Identifier: Apache-2.0
// Columns into rows, with every way in which they may not fit.
#include "service/rows.h"

#include <spdlog/fmt/fmt.h>

#include <limits>

#include "service/status.h"
#include "timeline/values.h"

namespace steelyard::service {
namespace {

grpc::Status wrong(const std::string& message) { return make_status(Error::kWrongRequest, message); }

// A bound, so that few rows cannot fill the memory; whether the number is right the channels know.
grpc::Status check_more(int count, std::size_t rows, const char* field) {
  constexpr std::size_t kMostEach = timeline::Values::kMost - 1;
  if (static_cast<std::size_t>(count) <= kMostEach * rows) return grpc::Status::OK;
  return wrong(
      fmt::format("{}: has {} values; at most {} for each of {} readings", field, count, kMostEach, rows));
}

grpc::Status check_lengths(const v1::Batch& batch, const Limits& limits) {
  const int rows = batch.time_step_ns_size();
  if (static_cast<std::size_t>(rows) > limits.batch_readings) {
    return wrong(fmt::format("batch.time_step_ns: has {} readings; at most {} fit in a batch", rows,
                             limits.batch_readings));
  }
  if (batch.channel_size() != rows || batch.value_size() != rows) {
    return wrong(
        fmt::format("batch: the columns time_step_ns, channel and value have {}, {} and {} rows; must have "
                    "the same number",
                    rows, batch.channel_size(), batch.value_size()));
  }
  if (batch.quality_row_size() != batch.quality_size()) {
    return wrong(
        fmt::format("batch: quality_row and quality have {} and {} entries; must have the same number",
                    batch.quality_row_size(), batch.quality_size()));
  }
  return check_more(batch.more_values_size(), static_cast<std::size_t>(rows), "batch.more_values");
}

grpc::Status check_sequence(std::uint64_t first, std::size_t rows, const char* field) {
  if (first == 0) return wrong(fmt::format("{}: is 0; must be at least 1", field));
  if (rows > 0 && first > std::numeric_limits<std::uint64_t>::max() - rows) {
    return wrong(fmt::format("{}: is {}; with {} readings the numbers run over", field, first, rows));
  }
  return grpc::Status::OK;
}

grpc::Status set_qualities(const v1::Batch& batch, std::vector<Row>& rows) {
  std::int64_t before = -1;
  for (int i = 0; i < batch.quality_row_size(); ++i) {
    const std::uint32_t row = batch.quality_row(i);
    if (row >= rows.size() || std::int64_t{row} <= before) {
      return wrong(fmt::format("batch.quality_row[{}]: is {}; rows must rise and be less than {}", i, row,
                               rows.size()));
    }
    rows[row].quality = static_cast<int>(batch.quality(i));
    before = row;
  }
  return grpc::Status::OK;
}

}  // namespace

grpc::Status to_rows(const v1::Batch& batch, const Limits& limits, Rows& out) {
  std::vector<Row>& rows = out.rows;
  if (auto status = check_lengths(batch, limits); !status.ok()) return status;
  const auto count = static_cast<std::size_t>(batch.time_step_ns_size());
  if (auto status = check_sequence(batch.first_sequence(), count, "batch.first_sequence"); !status.ok())
    return status;
  rows.resize(count);
  std::int64_t time_ns = batch.base_time_ns();
  for (std::size_t i = 0; i < count; ++i) {
    const int at = static_cast<int>(i);
    if (__builtin_add_overflow(time_ns, batch.time_step_ns(at), &time_ns)) {
      return wrong(fmt::format("batch.time_step_ns[{}]: is {}; the time runs over 64 bits", i,
                               batch.time_step_ns(at)));
    }
    rows[i] = {batch.first_sequence() + i, time_ns, batch.channel(at), 0, batch.value(at), 0, 0};
  }
  out.in_columns = true;
  out.more_values.assign(batch.more_values().begin(), batch.more_values().end());
  return set_qualities(batch, rows);
}

grpc::Status to_rows(const v1::Reading& reading, Rows& out) {
  if (auto status = check_sequence(reading.sequence(), 1, "reading.sequence"); !status.ok()) return status;
  const int more = reading.more_values_size();
  if (auto status = check_more(more, 1, "reading.more_values"); !status.ok()) return status;
  out.in_columns = false;
  out.more_values.assign(reading.more_values().begin(), reading.more_values().end());
  out.rows.assign(
      1, {reading.sequence(), reading.time_ns(), reading.channel(), static_cast<int>(reading.quality()),
          reading.value(), 0, static_cast<std::uint32_t>(more)});
  return grpc::Status::OK;
}

std::size_t share_out(Rows& rows, std::span<const std::uint32_t> parts) {
  if (!rows.in_columns) return rows.more_values.size();
  std::size_t at = 0;
  for (Row& row : rows.rows) {
    const std::uint32_t count = row.channel < parts.size() ? parts[row.channel] - 1 : 0;
    row.more_at = static_cast<std::uint32_t>(at);
    row.more_count = count;
    at += count;
  }
  return at;
}

}  // namespace steelyard::service
