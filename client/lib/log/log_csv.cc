// SPDX-License-Identifier: Apache-2.0
// Reading of logs: header → columns, rows → readings, everything wrong → a problem with its place.
#include "lib/log/log_csv.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <utility>

#include "lib/log/text.h"

namespace steelyard::client {
namespace {

using engine::Quality;
using Cell = CsvReader::Cell;

// Half of what 64 bits can tell, so that the difference of any two times of a log can be told, too.
constexpr engine::TimeNs kFarthestNs = engine::TimeNs{1} << 62;
constexpr std::string_view kQualitySuffix = ".quality";
constexpr std::array<std::pair<std::string_view, Quality>, 5> kQualities{{
    {"good", Quality::kGood},
    {"uncertain", Quality::kUncertain},
    {"bad", Quality::kBad},
    {"out_of_service", Quality::kOutOfService},
    {"simulated", Quality::kSimulated},
}};

std::optional<std::size_t> find_cell(const std::vector<Cell>& cells, std::string_view text) {
  const auto found =
      std::find_if(cells.begin(), cells.end(), [text](const Cell& cell) { return cell.text == text; });
  if (found == cells.end()) return std::nullopt;
  return static_cast<std::size_t>(found - cells.begin());
}

/// A value that its source declares unusable need not be there at all.
bool needs_no_value(Quality quality) { return quality == Quality::kBad || quality == Quality::kOutOfService; }

}  // namespace

LogReader::LogReader(std::istream& in, std::string file, Find find, OnProblem on_problem)
    : csv_(in), file_(std::move(file)), find_(std::move(find)), on_problem_(std::move(on_problem)) {}

/// Always false, so that a check can end with `return problem(…)`.
bool LogReader::problem(int line, int column, std::string_view field, std::string message) {
  if (on_problem_) on_problem_({file_, line, column, std::string(field), std::move(message)});
  return false;
}

bool LogReader::problem(const Cell& cell, std::string_view field, std::string message) {
  return problem(cell.line, cell.column, field, std::move(message));
}

bool LogReader::open() {
  const CsvReader::Got got = csv_.next();
  if (csv_.read_failed()) return problem(0, 0, "", "cannot be read");
  if (got == CsvReader::Got::kEnd) {
    return problem(1, 1, "", "is empty; must begin with a header such as time,channel,value");
  }
  if (got == CsvReader::Got::kWrong) {
    return problem(csv_.wrong().line, csv_.wrong().column, "header", csv_.wrong().message);
  }
  const std::vector<Cell>& header = csv_.cells();
  width_ = header.size();
  const std::string_view first = header.front().text;
  if (first.starts_with("\xFF\xFE") || first.starts_with("\xFE\xFF")) {
    return problem(1, 1, "header", "is UTF-16; must be UTF-8");
  }
  const std::optional<std::size_t> time = find_cell(header, "time");
  if (!time) return problem(header.front(), "header", "has no column \"time\"; must have one");
  time_ = *time;
  const bool has_channel = find_cell(header, "channel").has_value();
  const bool has_value = find_cell(header, "value").has_value();
  if (has_channel && has_value) return open_long(header);
  // A rig may call a channel "channel" or "value"; only if it does not is this a long header with a gap.
  if (has_channel && !find_("channel")) {
    return problem(header.front(), "header",
                   "has no column \"value\"; a long log must have time, channel and value");
  }
  if (has_value && !find_("value")) {
    return problem(header.front(), "header",
                   "has no column \"channel\"; a long log must have time, channel and value");
  }
  return open_wide(header);
}

bool LogReader::open_long(const std::vector<Cell>& header) {
  long_.emplace();
  bool sound = true;
  for (std::size_t i = 0; i < header.size(); ++i) {
    const std::string_view name = header[i].text;
    if (find_cell(header, name) != i) {
      sound = problem(header[i], "header", "has the column " + shown(name) + " twice");
    } else if (name == "channel") {
      long_->channel = i;
    } else if (name == "value") {
      long_->value = i;
    } else if (name == "quality") {
      long_->quality = i;
    } else if (name != "time") {
      sound = problem(header[i], "header",
                      "has the column " + shown(name) + "; a long log has time, channel, value and quality");
    }
  }
  return sound;
}

bool LogReader::open_wide(const std::vector<Cell>& header) {
  bool sound = true;
  for (std::size_t i = 0; i < header.size(); ++i) {
    if (find_cell(header, header[i].text) != i) {
      sound = problem(header[i], "header", "has the column " + shown(header[i].text) + " twice");
    } else if (i != time_ && !header[i].text.ends_with(kQualitySuffix)) {
      sound = add_wide_column(header[i], i) && sound;
    }
  }
  for (std::size_t i = 0; i < header.size(); ++i) {
    if (header[i].text.ends_with(kQualitySuffix)) sound = add_wide_quality(header[i], i) && sound;
  }
  if (sound && wide_.empty()) {
    return problem(header.front(), "header", "names no channel; must have a column for at least one");
  }
  return sound;
}

bool LogReader::add_wide_column(const Cell& cell, std::size_t at) {
  const std::optional<rig::Signal> signal = find_(cell.text);
  if (!signal) {
    return problem(cell, "header",
                   "has the column " + shown(cell.text) + "; the rig has no such channel or input");
  }
  wide_.push_back({std::string(cell.text), *signal, at, std::nullopt});
  return true;
}

bool LogReader::add_wide_quality(const Cell& cell, std::size_t at) {
  const std::string_view name = cell.text.substr(0, cell.text.size() - kQualitySuffix.size());
  const auto column =
      std::find_if(wide_.begin(), wide_.end(), [name](const Column& one) { return one.name == name; });
  if (column == wide_.end()) {
    return problem(cell, "header", "has the column " + shown(cell.text) + " but no column " + shown(name));
  }
  column->quality = at;
  return true;
}

bool LogReader::next(LogRow& row) {
  row.readings.clear();
  switch (csv_.next()) {
    case CsvReader::Got::kEnd:
      if (csv_.read_failed()) problem(csv_.line(), 1, "", "cannot be read beyond this line");
      return false;
    case CsvReader::Got::kWrong:
      row.number = ++rows_;
      row.line = csv_.wrong().line;
      problem(csv_.wrong().line, csv_.wrong().column, "row", csv_.wrong().message);
      return true;
    case CsvReader::Got::kRecord:
      row.number = ++rows_;
      row.line = csv_.line();
      read_row(row);
      return true;
  }
  return false;
}

void LogReader::read_row(LogRow& row) {
  const std::size_t cells = csv_.cells().size();
  if (cells != width_) {
    problem(row.line, 1, "row",
            "has " + std::to_string(cells) + (cells == 1 ? " cell" : " cells") + "; must have " +
                std::to_string(width_) + " like the header");
    return;
  }
  row.time_column = csv_.cells()[time_].column;
  const std::optional<engine::TimeNs> time_ns = read_time();
  if (!time_ns) return;
  if (long_) {
    read_long(row, *time_ns);
  } else {
    read_wide(row, *time_ns);
  }
}

std::optional<engine::TimeNs> LogReader::read_time() {
  const Cell& cell = csv_.cells()[time_];
  const std::optional<engine::TimeNs> time_ns = parse_time(cell.text);
  if (time_ns && *time_ns > -kFarthestNs && *time_ns < kFarthestNs) return time_ns;
  problem(cell, "time",
          "is " + shown(cell.text) +
              "; must be RFC 3339 with an offset, or decimal seconds since 1970, between the years "
              "1824 and 2115");
  return std::nullopt;
}

void LogReader::read_long(LogRow& row, engine::TimeNs time_ns) {
  const Cell& name = csv_.cells()[long_->channel];
  const std::optional<rig::Signal> signal = find_(name.text);
  if (!signal) {
    problem(name, "channel", "is " + shown(name.text) + "; the rig has no such channel or input");
    return;
  }
  const std::optional<Quality> quality = read_quality(long_->quality, name.text);
  if (!quality) return;
  const Cell& cell = csv_.cells()[long_->value];
  if (cell.text.empty() && needs_no_value(*quality)) {
    row.readings.push_back({time_ns, *signal, 0.0, *quality});
    return;
  }
  const std::optional<double> value = read_value(cell, name.text);
  if (value) row.readings.push_back({time_ns, *signal, *value, *quality});
}

void LogReader::read_wide(LogRow& row, engine::TimeNs time_ns) {
  for (const Column& column : wide_) {
    const Cell& cell = csv_.cells()[column.value];
    if (cell.text.empty()) continue;
    const std::optional<double> value = read_value(cell, column.name);
    const std::optional<Quality> quality = read_quality(column.quality, column.name);
    if (value && quality) row.readings.push_back({time_ns, column.signal, *value, *quality});
  }
}

std::optional<double> LogReader::read_value(const Cell& cell, std::string_view name) {
  const std::optional<double> value = parse_number(cell.text);
  if (value && std::isfinite(*value)) return value;
  if (cell.text.empty()) {
    problem(cell, name, "is empty; must be a number");
  } else {
    problem(cell, name, "is " + shown(cell.text) + (value ? "; must be finite" : "; must be a number"));
  }
  return std::nullopt;
}

std::optional<Quality> LogReader::read_quality(std::optional<std::size_t> at, std::string_view name) {
  if (!at) return Quality::kGood;
  const Cell& cell = csv_.cells()[*at];
  if (cell.text.empty()) return Quality::kGood;
  for (const auto& [word, quality] : kQualities) {
    if (cell.text == word) return quality;
  }
  problem(cell, std::string(name) + std::string(kQualitySuffix),
          "is " + shown(cell.text) + "; must be good, uncertain, bad, out_of_service or simulated");
  return std::nullopt;
}

}  // namespace steelyard::client
