// SPDX-License-Identifier: Apache-2.0
// Do stated probabilities come true? A reliability diagram (Murphy & Winkler 1977) of ten bins whose standard
// errors allow for the fact that the moments of one run are alike: each run counts once.
#pragma once

#include <array>
#include <string>

namespace steelyard::judges {

/// A rate with the standard error that independent runs give it.
class Rate {
 public:
  void add(double hit, double expected) {
    run_difference_ += hit - expected;
    hits_ += hit;
    expected_ += expected;
    ++cases_;
    touched_ = true;
  }
  void end_run();

  [[nodiscard]] long cases() const { return cases_; }
  [[nodiscard]] long runs() const { return runs_; }
  [[nodiscard]] double observed() const { return hits_ / static_cast<double>(cases_); }
  [[nodiscard]] double expected() const { return expected_ / static_cast<double>(cases_); }
  [[nodiscard]] double standard_error() const;  ///< of observed − expected

 private:
  double run_difference_ = 0.0;
  double squares_ = 0.0;
  double hits_ = 0.0;
  double expected_ = 0.0;
  long cases_ = 0;
  long runs_ = 0;
  bool touched_ = false;
};

struct Reliability {
  std::string name;
  std::array<Rate, 10> bins;
  Rate doubt;  ///< all that is stated from 0.1 to 0.9 together

  void add(double stated, bool came_true);
  void end_run();
};

}  // namespace steelyard::judges
