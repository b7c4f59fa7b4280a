// SPDX-License-Identifier: Apache-2.0
#include "outside/csv.h"

#include <charconv>
#include <fstream>
#include <stdexcept>

namespace steelyard::outside {
namespace {

std::vector<std::string> split(const std::string& line) {
  std::vector<std::string> cells(1);
  bool quoted = false;
  for (const char c : line) {
    if (c == '"') {
      quoted = !quoted;
    } else if (c == ',' && !quoted) {
      cells.emplace_back();
    } else if (c != '\r') {
      cells.back() += c;
    }
  }
  return cells;
}

double parse(const std::string& text) {
  double value = 0.0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (error == std::errc::result_out_of_range) return 0.0;  // the tables hold no overflow, only underflow
  if (error != std::errc{} || end != text.data() + text.size())
    throw std::runtime_error("not a number: " + text);
  return value;
}

}  // namespace

Csv Csv::open(const std::string& name) {
  const std::string path = std::string(STEELYARD_OUTSIDE_DATA) + "/" + name;
  std::ifstream file(path);
  Csv table;
  std::string line;
  if (!std::getline(file, line)) throw std::runtime_error(path + ": cannot be read");
  const auto header = split(line);
  for (std::size_t i = 0; i < header.size(); ++i) table.columns_[header[i]] = i;
  while (std::getline(file, line)) {
    table.cells_.push_back(split(line));
    if (table.cells_.back().size() != header.size()) throw std::runtime_error(path + ": ragged row: " + line);
  }
  return table;
}

const std::string& Csv::text(std::size_t row, const std::string& column) const {
  return cells_.at(row).at(columns_.at(column));
}

double Csv::number(std::size_t row, const std::string& column) const { return parse(text(row, column)); }

std::optional<double> Csv::reading(std::size_t row, const std::string& column) const {
  const std::string& cell = text(row, column);
  if (cell.empty()) return {};
  return parse(cell);
}

double value_of(const Csv& table, const std::string& name, const std::string& quantity) {
  for (std::size_t i = 0; i < table.rows(); ++i)
    if (table.text(i, "case") == name && table.text(i, "quantity") == quantity)
      return table.number(i, "value");
  throw std::runtime_error("no value of " + quantity + " in case " + name);
}

}  // namespace steelyard::outside
