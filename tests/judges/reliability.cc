// SPDX-License-Identifier: Apache-2.0
#include "judges/reliability.h"

#include <algorithm>
#include <cmath>

namespace steelyard::judges {

void Rate::end_run() {
  squares_ += run_difference_ * run_difference_;
  run_difference_ = 0.0;
  runs_ += touched_;
  touched_ = false;
}

double Rate::standard_error() const {
  return cases_ > 0 ? std::sqrt(squares_) / static_cast<double>(cases_) : INFINITY;
}

void Reliability::add(double stated, bool came_true) {
  const auto bin = static_cast<std::size_t>(std::clamp(stated * 10.0, 0.0, 9.0));
  bins[bin].add(came_true ? 1.0 : 0.0, stated);
  if (bin > 0 && bin < 9) doubt.add(came_true ? 1.0 : 0.0, stated);
}

void Reliability::end_run() {
  for (Rate& bin : bins) bin.end_run();
  doubt.end_run();
}

}  // namespace steelyard::judges
