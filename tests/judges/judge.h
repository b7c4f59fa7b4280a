// SPDX-License-Identifier: Apache-2.0
// What the programs of this folder have in common: options that are numbers, and bounds that count when
// broken.
#pragma once

#include <map>
#include <string>

namespace steelyard::judges {

/// `--name value` pairs, all numbers. An option that is not in `defaults`, or a value that is no number, ends
/// the program with exit code 2 and a message.
class Numbers {
 public:
  Numbers(int argc, char** argv, std::map<std::string, double> defaults);
  [[nodiscard]] double operator[](const std::string& name) const { return values_.at(name); }
  [[nodiscard]] int whole(const std::string& name) const { return static_cast<int>(values_.at(name)); }

 private:
  std::map<std::string, double> values_;
};

/// Counts broken bounds. A bound that cannot hold today is printed and not counted where `--known 1` is given
/// (the short forms that ctest runs), so that each program has one list of bounds.
class Bounds {
 public:
  explicit Bounds(bool forgive_known) : forgive_known_(forgive_known) {}

  /// Prints the breach if `holds` is false. `known`: it does not hold today.
  void require(bool holds, const std::string& what, bool known = false);
  /// Prints the sum; the exit code.
  [[nodiscard]] int exit_code() const;

 private:
  bool forgive_known_;
  int broken_ = 0;
  int forgiven_ = 0;
};

[[nodiscard]] std::string format(const char* pattern, ...) __attribute__((format(printf, 1, 2)));

}  // namespace steelyard::judges
