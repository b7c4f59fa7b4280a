// SPDX-License-Identifier: Apache-2.0
// Logs: readings from a CSV file, long or wide, as design.md §5 says.
//
//   long:  time,channel,value[,value2,value3…][,quality]
//   wide:  time,<name>,<name>.quality,<name>.1,<name>.2…     an empty cell is no reading
//
// The parts of a vector channel stand in value, value2 … or in <name>.1, <name>.2 …; all of them or none.
// A wrong header is fatal. A wrong cell refuses its own reading, a wrong time or a wrong number of cells the
// row; each is told to `on_problem` and reading goes on. Nothing in the file can throw or abort.
//
//   LogReader log(stream, "log.csv", find, on_problem);
//   if (!log.open()) return 2;                       // on_problem has been told why
//   while (log.next(row)) use(row);
#pragma once

#include <cstdint>
#include <functional>
#include <istream>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "engine/model.h"
#include "lib/log/csv.h"
#include "rig/rig.h"
#include "timeline/values.h"

namespace steelyard::client {

/// One reading of a log.
struct LogReading {
  engine::TimeNs time_ns = 0;
  rig::Signal signal;
  timeline::Values values;  ///< finite, one for each part
  engine::Quality quality = engine::Quality::kGood;
};

/// What a name in a log stands for.
struct Named {
  rig::Signal signal;
  int parts = 1;  ///< of the channel
};

/// The readings of one row (none if all its cells are empty or refused).
struct LogRow {
  std::uint64_t number =
      0;  ///< of the row, from 1, not counting the header; wrong rows count, empty lines do not
  int line = 0;
  int time_column = 0;  ///< where its time stands, for messages
  std::vector<LogReading> readings;
};

/// Where a long log's cells stand. (Not inside the reader: clang 14 cannot make an optional of a nested
/// aggregate with initialisers while the class is incomplete.)
struct LongColumns {
  std::size_t channel = 0;
  std::vector<std::size_t> values;  ///< by part
  std::optional<std::size_t> quality;
};

class LogReader {
 public:
  /// What a name in the log stands for; nullopt: the rig has no such channel or input.
  using Find = std::function<std::optional<Named>(std::string_view)>;
  /// Told everything that is wrong, in the order of the file.
  using OnProblem = std::function<void(const rig::Problem&)>;

  /// `file` is used in messages alone. `in` must outlive the reader.
  LogReader(std::istream& in, std::string file, Find find, OnProblem on_problem);

  /// Reads the header. False: it cannot be used, nothing else may be called.
  [[nodiscard]] bool open();
  /// Reads the next row; false at the end. Rows without any usable reading come with none.
  [[nodiscard]] bool next(LogRow& row);

  [[nodiscard]] std::uint64_t bytes_read() const { return csv_.bytes_read(); }
  /// The file could not be read to its end (an I/O error); on_problem has been told.
  [[nodiscard]] bool read_failed() const { return csv_.read_failed(); }

 private:
  struct Column {  // of a wide log: those of one name
    std::string name;
    rig::Signal signal;
    std::vector<std::optional<std::size_t>> values;  // by part; none is missing once the header is read
    std::optional<std::size_t> quality;
    int header_column = 0;  // of its first cell, for messages
  };
  bool open_long(const std::vector<CsvReader::Cell>& header);
  bool add_long_value(const std::vector<CsvReader::Cell>& header, std::size_t at);
  bool open_wide(const std::vector<CsvReader::Cell>& header);
  bool add_wide_column(const CsvReader::Cell& cell, std::size_t at);
  bool add_wide_part(const CsvReader::Cell& cell, std::size_t at);
  bool check_wide_parts(const CsvReader::Cell& first);
  bool add_wide_quality(const CsvReader::Cell& cell, std::size_t at);
  void read_row(LogRow& row);
  void read_long(LogRow& row, engine::TimeNs time_ns);
  void read_wide(LogRow& row, engine::TimeNs time_ns);
  std::optional<timeline::Values> read_long_values(const CsvReader::Cell& name, int parts,
                                                   engine::Quality quality);
  std::optional<timeline::Values> read_wide_values(const Column& column);
  std::optional<engine::TimeNs> read_time();
  std::optional<double> read_value(const CsvReader::Cell& cell, std::string_view name);
  std::optional<engine::Quality> read_quality(std::optional<std::size_t> at, std::string_view name);
  bool problem(int line, int column, std::string_view field, std::string message);
  bool problem(const CsvReader::Cell& cell, std::string_view field, std::string message);

  CsvReader csv_;
  std::string file_;
  Find find_;
  OnProblem on_problem_;
  std::size_t width_ = 0;  // cells of the header
  std::size_t time_ = 0;   // column of the time
  std::optional<LongColumns> long_;
  std::vector<Column> wide_;
  std::uint64_t rows_ = 0;
};

}  // namespace steelyard::client
