// SPDX-License-Identifier: Apache-2.0
// The log that a generator writes: readings in the order of their time stamps, long form
// (time,channel,value), because the channels' clocks differ; and beside it the events that happened, for
// people and tests.
#pragma once

#include <cstdint>
#include <ostream>
#include <string>
#include <string_view>
#include <vector>

namespace steelyard::demo {

/// A reading as its transmitter sends it: a whole number of counts, printed as counts · 10^−decimals.
struct Row {
  std::int64_t time_ms = 0;  ///< since 1970-01-01T00:00:00Z
  std::string_view channel;  ///< names are literals
  std::int64_t counts = 0;
  int decimals = 0;
};

/// Something that happened from `from_s` to `to_s` (after the log's start). Channel is the channel whose
/// readings are wrong, or "plant" where all sensors are right and the plant does something that no input
/// tells.
struct Event {
  double from_s = 0.0;
  double to_s = 0.0;
  std::string_view channel;
  std::string_view kind;
  double size = 0.0;  ///< greatest deviation, in the unit of the channel (plant: m3/s or m)
};

/// What really was, for judging estimates; one line a sample.
struct Truth {
  std::string header;
  std::vector<std::vector<double>> lines;  ///< first column: seconds after the log's start
};

struct Log {
  std::int64_t start_s = 0;  ///< since 1970-01-01T00:00:00Z
  std::vector<Row> rows;
  std::vector<Event> events;
  Truth truth;
};

/// `value` as counts of 10^−decimals. Halves are rounded away from zero.
[[nodiscard]] std::int64_t to_counts(double value, int decimals);

/// Sorts the rows by time, then channel, and writes them. Both return false if the stream failed.
bool write_rows(Log& log, std::ostream& out);
bool write_events(Log& log, std::ostream& out);
bool write_truth(const Log& log, std::ostream& out);

}  // namespace steelyard::demo
