// SPDX-License-Identifier: Apache-2.0
// RFC 4180 record by record: a state machine over characters that runs on from line to line inside quotes.
#include "lib/log/csv.h"

#include <cstring>
#include <iterator>
#include <limits>
#include <utility>

namespace steelyard::client {
namespace {

constexpr std::size_t kChunkBytes = 64 * 1024;
constexpr std::string_view kByteOrderMark = "\xEF\xBB\xBF";

bool starts_character(char c) { return (static_cast<unsigned char>(c) & 0xC0U) != 0x80U; }

}  // namespace

CsvReader::CsvReader(std::istream& in) : in_(in), chunk_(kChunkBytes) {}

/// Takes what is there and waits only if that is nothing: a log may come from a pipe, a row at a time.
bool CsvReader::fill() {
  if (!in_.good()) return false;
  const bool any = in_.peek() != std::istream::traits_type::eof();
  if (in_.bad()) read_failed_ = true;
  if (!any) return false;
  chunk_at_ = 0;
  chunk_end_ =
      static_cast<std::size_t>(in_.readsome(chunk_.data(), static_cast<std::streamsize>(chunk_.size())));
  bytes_read_ += chunk_end_;
  return chunk_end_ > 0;
}

/// The next line without its end, into line_. What lies beyond kMaxRecordBytes is read and thrown away.
bool CsvReader::next_line_from_stream() {
  line_.text.clear();
  line_.too_long = false;
  bool any = false;
  while (chunk_at_ < chunk_end_ || fill()) {
    any = true;
    const char* const begin = chunk_.data() + chunk_at_;
    const std::size_t left = chunk_end_ - chunk_at_;
    const void* const found = std::memchr(begin, '\n', left);
    const std::size_t take =
        found == nullptr ? left : static_cast<std::size_t>(static_cast<const char*>(found) - begin);
    if (line_.text.size() + take > kMaxRecordBytes) line_.too_long = true;
    if (!line_.too_long) line_.text.append(begin, take);
    chunk_at_ += take + (found == nullptr ? 0 : 1);
    if (found != nullptr) break;
  }
  if (line_.text.ends_with('\r')) line_.text.pop_back();
  return any;
}

bool CsvReader::next_line() {
  if (!again_.empty()) {
    line_ = std::move(again_.front());
    again_.pop_front();
  } else if (!next_line_from_stream()) {
    return false;
  }
  if (line_number_ < std::numeric_limits<int>::max()) ++line_number_;
  if (line_number_ == 1 && line_.text.starts_with(kByteOrderMark)) line_.text.erase(0, kByteOrderMark.size());
  return true;
}

CsvReader::Got CsvReader::next() {
  while (next_line()) {
    if (line_.too_long) return fail(line_number_, 1, "is longer than 1 MiB; a row must be shorter");
    if (!line_.text.empty()) return read_record();
  }
  return Got::kEnd;
}

CsvReader::Got CsvReader::read_record() {
  record_line_ = line_number_;
  values_.clear();
  spans_.clear();
  column_ = 0;
  begin_cell();
  if (!scan_line()) return Got::kWrong;
  if (where_ == Where::kQuoted) return read_on_in_quotes();
  finish_cells();
  return Got::kRecord;
}

/// A quoted cell may hold line breaks. Its lines (at most kMaxRecordBytes) are remembered: if the quote turns
/// out not to be closed, they are read again as rows of their own.
CsvReader::Got CsvReader::read_on_in_quotes() {
  std::deque<Line> more;
  bool sound = true;
  while (sound && where_ == Where::kQuoted && values_.size() <= kMaxRecordBytes && next_line()) {
    more.push_back(line_);
    values_ += '\n';
    column_ = 0;
    sound = !line_.too_long && scan_line();
  }
  if (sound && where_ != Where::kQuoted) {
    finish_cells();
    return Got::kRecord;
  }
  line_number_ = record_line_;
  again_.insert(again_.begin(), std::make_move_iterator(more.begin()), std::make_move_iterator(more.end()));
  return fail(quote_line_, quote_column_, "opens a quoted cell that is not closed as RFC 4180 says");
}

bool CsvReader::scan_line() {
  for (const char c : line_.text) {
    if (starts_character(c)) ++column_;
    if (!scan_char(c)) return false;
  }
  return true;
}

bool CsvReader::scan_char(char c) {
  switch (where_) {
    case Where::kCellStart:
      if (c == '"') {
        where_ = Where::kQuoted;
        quote_line_ = line_number_;
        quote_column_ = column_;
        return true;
      }
      where_ = Where::kPlain;
      [[fallthrough]];
    case Where::kPlain:
      if (c == ',') {
        begin_cell();
      } else if (c == '"') {
        fail(line_number_, column_, "has a quote inside a cell that does not begin with one");
        return false;
      } else {
        values_ += c;
      }
      return true;
    case Where::kQuoted:
      if (c == '"') {
        where_ = Where::kAfterQuote;
      } else {
        values_ += c;
      }
      return true;
    case Where::kAfterQuote:
      if (c == '"') {
        values_ += '"';
        where_ = Where::kQuoted;
      } else if (c == ',') {
        begin_cell();
      } else {
        fail(line_number_, column_, "has text after the closing quote of a cell");
        return false;
      }
      return true;
  }
  return true;
}

void CsvReader::begin_cell() {
  where_ = Where::kCellStart;
  spans_.push_back({values_.size(), line_number_, column_ + 1});
}

void CsvReader::finish_cells() {
  cells_.clear();
  const std::string_view all = values_;
  for (std::size_t i = 0; i < spans_.size(); ++i) {
    const std::size_t end = i + 1 < spans_.size() ? spans_[i + 1].begin : values_.size();
    cells_.push_back({all.substr(spans_[i].begin, end - spans_[i].begin), spans_[i].line, spans_[i].column});
  }
}

CsvReader::Got CsvReader::fail(int line, int column, std::string message) {
  wrong_ = {line, column, std::move(message)};
  return Got::kWrong;
}

}  // namespace steelyard::client
