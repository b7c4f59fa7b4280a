// SPDX-License-Identifier: Apache-2.0
// Waiting in short pieces, so that a request to end is noticed.
#include "cli/pace.h"

#include <algorithm>
#include <chrono>
#include <cmath>
#include <thread>

#include "cli/signals.h"
#include "lib/log/text.h"

namespace steelyard::client {

std::optional<double> parse_pace(std::string_view text) {
  if (text == "fast") return 0.0;
  if (text == "real") return 1.0;
  if (!text.starts_with('x')) return std::nullopt;
  const std::optional<double> times = parse_number(text.substr(1));
  if (!times || !std::isfinite(*times) || !(*times > 0.0)) return std::nullopt;
  return times;
}

double Pace::left_s(engine::TimeNs time_ns, SteadyTime now) {
  if (!paced()) return 0.0;
  if (!first_ns_) {
    first_ns_ = time_ns;
    begin_ = now;
  }
  const double after_s = static_cast<double>(time_ns - *first_ns_) * 1e-9 / times_;
  return after_s - std::chrono::duration<double>(now - begin_).count();
}

bool Pace::wait_for(engine::TimeNs time_ns) {
  constexpr double kPiece_s = 0.1;
  while (!interrupted()) {
    const double left = left_s(time_ns, steady_now());
    if (left <= 0.0) return true;
    std::this_thread::sleep_for(std::chrono::duration<double>(std::min(left, kPiece_s)));
  }
  return false;
}

}  // namespace steelyard::client
