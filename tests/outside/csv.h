// SPDX-License-Identifier: Apache-2.0
// Reads the reference tables in data/: a header line, commas, double quotes around cells with commas.
#pragma once

#include <map>
#include <optional>
#include <string>
#include <vector>

namespace steelyard::outside {

class Csv {
 public:
  /// A table of the data folder; throws std::runtime_error that names the file if it cannot be read.
  static Csv open(const std::string& name);

  [[nodiscard]] std::size_t rows() const { return cells_.size(); }
  /// Throws std::out_of_range for an unknown column.
  [[nodiscard]] const std::string& text(std::size_t row, const std::string& column) const;
  /// Throws std::runtime_error for a cell that is no number; a value below the doubles' range reads as 0.
  [[nodiscard]] double number(std::size_t row, const std::string& column) const;
  /// Nothing for an empty cell.
  [[nodiscard]] std::optional<double> reading(std::size_t row, const std::string& column) const;

 private:
  std::map<std::string, std::size_t> columns_;
  std::vector<std::vector<std::string>> cells_;
};

/// A table of (case, quantity, value) lines, as in sets 04: value of `quantity` in `name`.
[[nodiscard]] double value_of(const Csv& table, const std::string& name, const std::string& quantity);

}  // namespace steelyard::outside
