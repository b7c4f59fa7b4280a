// SPDX-License-Identifier: Apache-2.0
// Reading of logs: header → columns, rows → readings, everything wrong → a problem with its place.
#include "lib/log/log_csv.h"

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>
#include <system_error>
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

/// "fix.2" is part 2 of "fix"; part 0: the name is not of this form.
struct PartName {
  std::string_view name;
  int part = 0;
};

PartName split_part(std::string_view text) {
  const std::size_t dot = text.rfind('.');
  if (dot == std::string_view::npos) return {text, 0};
  const std::string_view digits = text.substr(dot + 1);
  int part = 0;
  const auto [end, error] = std::from_chars(digits.data(), digits.data() + digits.size(), part);
  const bool whole = error == std::errc() && end == digits.data() + digits.size();
  if (!whole || part < 1 || digits.front() == '0') return {text, 0};
  return {text.substr(0, dot), part};
}

std::string part_name(std::string_view name, std::size_t part) {
  return std::string(name) + "." + std::to_string(part);
}

/// "value", "value2", "value3" …
std::string value_name(std::size_t part) { return part == 1 ? "value" : "value" + std::to_string(part); }

bool is_value_name(std::string_view text) {
  for (std::size_t part = 1; part <= timeline::Values::kMost; ++part) {
    if (text == value_name(part)) return true;
  }
  return false;
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
    } else if (is_value_name(name)) {
      sound = add_long_value(header, i) && sound;
    } else if (name == "quality") {
      long_->quality = i;
    } else if (name != "time") {
      sound = problem(
          header[i], "header",
          "has the column " + shown(name) + "; a long log has time, channel, value, value2 … and quality");
    }
  }
  return sound;
}

/// All value columns are put in their places when the first of them is met.
bool LogReader::add_long_value(const std::vector<Cell>& header, std::size_t at) {
  if (!long_->values.empty()) return true;
  std::size_t last = 1;
  for (std::size_t part = 1; part <= timeline::Values::kMost; ++part) {
    if (find_cell(header, value_name(part))) last = part;
  }
  for (std::size_t part = 1; part <= last; ++part) {
    const auto column = find_cell(header, value_name(part));
    if (!column) {
      return problem(
          header[at], "header",
          "has the column " + shown(value_name(last)) + " but no column " + shown(value_name(part)));
    }
    long_->values.push_back(*column);
  }
  return true;
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
  sound = check_wide_parts(header.front()) && sound;
  if (sound && wide_.empty()) {
    return problem(header.front(), "header", "names no channel; must have a column for at least one");
  }
  return sound;
}

bool LogReader::add_wide_column(const Cell& cell, std::size_t at) {
  const std::optional<Named> named = find_(cell.text);
  if (!named) return add_wide_part(cell, at);
  if (named->parts > 1) {
    return problem(cell, "header",
                   "has the column " + shown(cell.text) + "; the channel has " +
                       std::to_string(named->parts) + " parts, " + shown(part_name(cell.text, 1)) + " …");
  }
  wide_.push_back({std::string(cell.text), named->signal, {at}, std::nullopt, cell.column});
  return true;
}

bool LogReader::add_wide_part(const Cell& cell, std::size_t at) {
  const auto [name, part] = split_part(cell.text);
  const std::optional<Named> named = part > 0 ? find_(name) : std::nullopt;
  if (!named || named->parts < 2) {
    return problem(cell, "header",
                   "has the column " + shown(cell.text) + "; the rig has no such channel or input");
  }
  if (part > named->parts) {
    return problem(cell, "header",
                   "has the column " + shown(cell.text) + "; the channel has " +
                       std::to_string(named->parts) + " parts");
  }
  auto column = std::find_if(wide_.begin(), wide_.end(), [&](const Column& one) { return one.name == name; });
  if (column == wide_.end()) {
    const auto parts = static_cast<std::size_t>(named->parts);
    column = wide_.insert(wide_.end(),
                          {std::string(name), named->signal, std::vector<std::optional<std::size_t>>(parts),
                           std::nullopt, cell.column});
  }
  column->values[static_cast<std::size_t>(part) - 1] = at;
  return true;
}

bool LogReader::check_wide_parts(const Cell& first) {
  bool sound = true;
  for (const Column& column : wide_) {
    for (std::size_t i = 0; i < column.values.size(); ++i) {
      if (column.values[i]) continue;
      sound = problem(first.line, column.header_column, "header",
                      "has no column " + shown(part_name(column.name, i + 1)) + "; a log of " + column.name +
                          " must have all its " + std::to_string(column.values.size()) + " parts");
    }
  }
  return sound;
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
  const std::optional<Named> named = find_(name.text);
  if (!named) {
    problem(name, "channel", "is " + shown(name.text) + "; the rig has no such channel or input");
    return;
  }
  const std::optional<Quality> quality = read_quality(long_->quality, name.text);
  if (!quality) return;
  const auto values = read_long_values(name, named->parts, *quality);
  if (values) row.readings.push_back({time_ns, named->signal, *values, *quality});
}

std::optional<timeline::Values> LogReader::read_long_values(const Cell& name, int parts, Quality quality) {
  const auto wanted = static_cast<std::size_t>(parts);
  const std::vector<Cell>& cells = csv_.cells();
  const auto is_empty = [&](std::size_t at) { return cells[at].text.empty(); };
  if (needs_no_value(quality) && std::all_of(long_->values.begin(), long_->values.end(), is_empty)) {
    return timeline::Values(std::vector<double>(wanted, 0.0));
  }
  if (wanted > long_->values.size()) {
    problem(name, name.text,
            "has " + std::to_string(wanted) + " parts; the log has no column " +
                shown(value_name(long_->values.size() + 1)));
    return std::nullopt;
  }
  timeline::Values values(std::span<const double>{});
  for (std::size_t i = 0; i < long_->values.size(); ++i) {
    const Cell& cell = cells[long_->values[i]];
    const std::string field = wanted == 1 ? std::string(name.text) : part_name(name.text, i + 1);
    if (i >= wanted) {
      if (cell.text.empty()) continue;
      problem(cell, name.text,
              value_name(i + 1) + " is " + shown(cell.text) + "; must be empty for a channel of " +
                  std::to_string(wanted) + (wanted == 1 ? " part" : " parts"));
      return std::nullopt;
    }
    const std::optional<double> value = read_value(cell, field);
    if (!value) return std::nullopt;
    values.add(*value);
  }
  return values;
}

void LogReader::read_wide(LogRow& row, engine::TimeNs time_ns) {
  for (const Column& column : wide_) {
    const bool any = std::any_of(column.values.begin(), column.values.end(),
                                 [this](const auto& at) { return !csv_.cells()[*at].text.empty(); });
    if (!any) continue;
    const std::optional<timeline::Values> values = read_wide_values(column);
    const std::optional<Quality> quality = read_quality(column.quality, column.name);
    if (values && quality) row.readings.push_back({time_ns, column.signal, *values, *quality});
  }
}

std::optional<timeline::Values> LogReader::read_wide_values(const Column& column) {
  timeline::Values values(std::span<const double>{});
  for (std::size_t i = 0; i < column.values.size(); ++i) {
    const bool alone = column.values.size() == 1;
    const std::optional<double> value =
        read_value(csv_.cells()[*column.values[i]], alone ? column.name : part_name(column.name, i + 1));
    if (!value) return std::nullopt;
    values.add(*value);
  }
  return values;
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
