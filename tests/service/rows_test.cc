// SPDX-License-Identifier: Apache-2.0
// Columns into rows: a table of wrong batches, and a right one.
#include "service/rows.h"

#include <gtest/gtest.h>

#include <array>
#include <functional>
#include <limits>
#include <string>
#include <utility>
#include <vector>

#include "fixture.h"

namespace steelyard::service {
namespace {

struct Wrong {
  const char* name;
  std::function<void(v1::Batch&)> spoil;
  const char* message;
};

constexpr std::int64_t kMost = std::numeric_limits<std::int64_t>::max();

const Wrong kWrong[] = {
    {"sequence 0", [](v1::Batch& b) { b.set_first_sequence(0); },
     "batch.first_sequence: is 0; must be at least 1"},
    {"sequence runs over",
     [](v1::Batch& b) { b.set_first_sequence(std::numeric_limits<std::uint64_t>::max() - 1); },
     "batch.first_sequence: is 18446744073709551614; with 3 readings the numbers run over"},
    {"channel too short", [](v1::Batch& b) { b.mutable_channel()->RemoveLast(); }, "3, 2 and 3 rows"},
    {"value too long", [](v1::Batch& b) { b.add_value(1); }, "3, 3 and 4 rows"},
    {"no times", [](v1::Batch& b) { b.clear_time_step_ns(); }, "0, 3 and 3 rows"},
    {"time runs over", [](v1::Batch& b) { b.set_time_step_ns(2, kMost); }, "batch.time_step_ns[2]"},
    {"time runs under",
     [](v1::Batch& b) {
       b.set_base_time_ns(-kMost);
       b.set_time_step_ns(1, -2);
     },
     "batch.time_step_ns[1]"},
    {"quality without row", [](v1::Batch& b) { b.add_quality(v1::BAD); }, "0 and 1 entries"},
    {"row without quality", [](v1::Batch& b) { b.add_quality_row(1); }, "1 and 0 entries"},
    {"quality row too large",
     [](v1::Batch& b) {
       b.add_quality_row(3);
       b.add_quality(v1::BAD);
     },
     "batch.quality_row[0]: is 3"},
    {"quality rows fall",
     [](v1::Batch& b) {
       b.add_quality_row(1);
       b.add_quality_row(1);
       b.add_quality(v1::BAD);
       b.add_quality(v1::BAD);
     },
     "batch.quality_row[1]: is 1"},
    {"more values than all rows can have",
     [](v1::Batch& b) {
       for (int i = 0; i < 3 * 31 + 1; ++i) b.add_more_values(1);
     },
     "batch.more_values: has 94 values; at most 31 for each of 3 readings"},
};

TEST(Rows, WrongBatchesAreRefusedWithFieldValueAndRule) {
  for (const Wrong& wrong : kWrong) {
    v1::Batch spoilt = batch({.rows = 3});
    wrong.spoil(spoilt);
    Rows rows;
    EXPECT_TRUE(is_status(to_rows(spoilt, Limits{}, rows), grpc::StatusCode::INVALID_ARGUMENT, wrong.message))
        << wrong.name;
  }
}

TEST(Rows, ColumnsBecomeRows) {
  v1::Batch columns = batch({.first_sequence = 7, .start_ns = 1000, .step_ns = 500, .rows = 3, .channel = 2});
  columns.set_time_step_ns(2, -100);
  columns.add_quality_row(1);
  columns.add_quality(v1::UNCERTAIN);
  Rows message;
  ASSERT_TRUE(to_rows(columns, Limits{}, message).ok());
  const std::vector<Row>& rows = message.rows;
  ASSERT_EQ(rows.size(), 3U);
  EXPECT_EQ(rows[0].time_ns, 1000);
  EXPECT_EQ(rows[1].time_ns, 1500);
  EXPECT_EQ(rows[2].time_ns, 1400);
  EXPECT_EQ(rows[2].sequence, 9U);
  EXPECT_EQ(rows[1].quality, v1::UNCERTAIN);
  EXPECT_EQ(rows[2].quality, v1::GOOD);
  EXPECT_EQ(rows[2].channel, 2U);
}

// Channels 0 to 2 have 1, 3 and 2 parts.
TEST(Rows, RowsOfVectorChannelsTakeTheirPartsInTurn) {
  v1::Batch columns = batch({.rows = 4});
  for (const auto& [row, channel] : {std::pair{0, 1U}, {1, 0U}, {2, 2U}, {3, 9U}}) {
    columns.set_channel(row, channel);
  }
  for (const double value : {10.0, 11.0, 20.0}) columns.add_more_values(value);
  Rows message;
  ASSERT_TRUE(to_rows(columns, Limits{}, message).ok());
  const std::array<std::uint32_t, 3> parts{1, 3, 2};
  EXPECT_EQ(share_out(message, parts), 3U);
  EXPECT_EQ(message.more_values, (std::vector<double>{10.0, 11.0, 20.0}));
  EXPECT_EQ(message.rows[0].more_count, 2U);
  EXPECT_EQ(message.rows[1].more_count, 0U);
  EXPECT_EQ(message.rows[2].more_at, 2U);
  EXPECT_EQ(message.rows[2].more_count, 1U);
  EXPECT_EQ(message.rows[3].more_count, 0U) << "a channel that is not known has one part";
}

TEST(Rows, ASingleReadingHasItsPartsAlready) {
  v1::Reading reading;
  reading.set_sequence(1);
  reading.add_more_values(2.5);
  Rows message;
  ASSERT_TRUE(to_rows(reading, message).ok());
  EXPECT_EQ(message.rows[0].more_count, 1U);
  EXPECT_EQ(share_out(message, {}), 1U);
  EXPECT_EQ(message.rows[0].more_count, 1U);
  for (int i = 0; i < 31; ++i) reading.add_more_values(0);
  EXPECT_TRUE(is_status(to_rows(reading, message), grpc::StatusCode::INVALID_ARGUMENT,
                        "reading.more_values: has 32 values; at most 31"));
}

TEST(Rows, EmptyBatchIsNoError) {
  Rows rows;
  rows.rows.resize(5);
  EXPECT_TRUE(to_rows(batch({.rows = 0}), Limits{}, rows).ok());
  EXPECT_TRUE(rows.rows.empty());
}

}  // namespace
}  // namespace steelyard::service
