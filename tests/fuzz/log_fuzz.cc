// SPDX-License-Identifier: Apache-2.0
// Any bytes as a log: reading must end, throw nothing, and give finite numbers only.
#include <cmath>
#include <cstddef>
#include <cstdint>
#include <cstdlib>
#include <sstream>
#include <string>

#include "lib/log/log_csv.h"

namespace {

using steelyard::client::Named;

std::optional<Named> find(std::string_view name) {
  if (name == "a") return Named{{false, 0}, 1};
  if (name == "b") return Named{{false, 1}, 2};
  if (name == "u") return Named{{true, 0}, 1};
  return std::nullopt;
}

}  // namespace

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size) {
  std::istringstream in(std::string(reinterpret_cast<const char*>(data), size));
  std::size_t problems = 0;
  steelyard::client::LogReader log(in, "fuzz.csv", find, [&](const steelyard::rig::Problem& p) {
    if (p.text().empty()) std::abort();
    ++problems;
  });
  if (!log.open()) {
    if (problems == 0) std::abort();  // refused without a reason
    return 0;
  }
  steelyard::client::LogRow row;
  while (log.next(row))
    for (const auto& reading : row.readings) {
      const std::size_t parts = !reading.signal.is_input && reading.signal.index == 1 ? 2 : 1;
      if (reading.values.size() != parts) std::abort();
      for (const double value : reading.values.all())
        if (!std::isfinite(value) && reading.quality == steelyard::engine::Quality::kGood) std::abort();
    }
  return 0;
}
