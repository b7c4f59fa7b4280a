// SPDX-License-Identifier: Apache-2.0
// Records of a CSV text (RFC 4180), one at a time, from a stream of any length.
//
//   CsvReader csv(stream);
//   for (auto got = csv.next(); got != CsvReader::Got::kEnd; got = csv.next()) { … }
//
// Lines end in LF or CRLF; a byte-order mark at the start is skipped; empty lines are skipped. Memory is
// bounded by kMaxRecordBytes. A record that is wrong is reported and reading goes on with the line after the
// one on which it began: a quote that is never closed costs one line, not the rest of the file.
#pragma once

#include <cstdint>
#include <deque>
#include <istream>
#include <string>
#include <string_view>
#include <vector>

namespace steelyard::client {

inline constexpr std::size_t kMaxRecordBytes = 1U << 20U;

class CsvReader {
 public:
  enum class Got { kRecord, kWrong, kEnd };

  struct Cell {
    std::string_view text;  ///< without quotes; valid until the next call of next()
    int line = 0;           ///< from 1
    int column = 0;         ///< from 1, in characters (UTF-8), of the cell's first character
  };

  /// What is wrong with a record.
  struct Wrong {
    int line = 0;
    int column = 0;
    std::string message;
  };

  /// `in` must outlive the reader.
  explicit CsvReader(std::istream& in);

  Got next();
  [[nodiscard]] const std::vector<Cell>& cells() const { return cells_; }  ///< after kRecord
  [[nodiscard]] int line() const { return record_line_; }                  ///< on which the record began
  [[nodiscard]] const Wrong& wrong() const { return wrong_; }              ///< after kWrong
  [[nodiscard]] std::uint64_t bytes_read() const { return bytes_read_; }
  /// After kEnd: the stream ended because reading failed, not because it was at its end.
  [[nodiscard]] bool read_failed() const { return read_failed_; }

 private:
  enum class Where { kCellStart, kPlain, kQuoted, kAfterQuote };
  struct Line {
    std::string text;
    bool too_long = false;
  };
  struct Span {
    std::size_t begin = 0;
    int line = 0;
    int column = 0;
  };

  bool fill();
  bool next_line();
  bool next_line_from_stream();
  Got read_record();
  bool scan_line();
  bool scan_char(char c);
  void begin_cell();
  Got fail(int line, int column, std::string message);
  Got read_on_in_quotes();
  void finish_cells();

  std::istream& in_;
  std::vector<char> chunk_;
  std::size_t chunk_at_ = 0;
  std::size_t chunk_end_ = 0;
  std::uint64_t bytes_read_ = 0;
  bool read_failed_ = false;

  Line line_;
  int line_number_ = 0;
  std::deque<Line> again_;  // lines to be read once more after a quote that was never closed

  Where where_ = Where::kCellStart;
  int column_ = 0;
  int record_line_ = 0;
  int quote_line_ = 0;
  int quote_column_ = 0;
  std::string values_;  // text of all cells, one after another
  std::vector<Span> spans_;
  std::vector<Cell> cells_;
  Wrong wrong_;
};

}  // namespace steelyard::client
