// SPDX-License-Identifier: Apache-2.0
// steelyard_demo_log: writes the logs of this folder. Equal seeds give equal bytes.
//
//   steelyard_demo_log [basin | trolley | cart] [--seed N] [--events | --truth] > basin.csv
//
// The trolley's and the cart's timelines stand at the heads of trolley.cc and cart.cc. The basin's eight
// hours (hours:minutes after the start, which is 06:00 UTC):
//
//   0:00          dry weather, 6 L/s, level 1.13 m
//   0:20 – 0:52   pump 1 empties the basin from 1.2 to 0.4 m             no fault
//   0:35 – 0:37   remote I/O box repeats its last values                 FAULT of sonic and radar, 0.05 m at
//   its end 1:15          storm: 200 L/s at 1:35, 250 L/s at 2:57, tail to 5:00  no fault 1:30, 1:38    pump
//   1, then pump 2 as assist                          no fault 1:32 – 1:42   foam grows to 0.22 m, echo jumps
//   between foam, water   FAULT of sonic 1:42 – 2:07   echo held, until the foam is hosed down FAULT of sonic
//   2:22 – 2:42   old echo held, trembling by 2 mm; level rises 0.56 m   FAULT of radar
//   2:55 – 3:27   the weir overflows by up to 0.12 m3/s                  no sensor's fault
//   3:36 – 8:00   vent tube blocked, front passes: −25 mm/h to −0.10 m   FAULT of cell
//   4:58          both pumps stop at 0.4 m                               no fault
//   6:49 – 7:35   dry weather; pump 1 runs                               no fault
//   7:04 –        pump 1 ragged: its flow falls by 40 % over 20 min      no sensor's fault
#include <cerrno>
#include <charconv>
#include <cstdint>
#include <cstring>
#include <iostream>
#include <optional>
#include <string_view>

#include "basin.h"
#include "cart.h"
#include "trolley.h"

namespace {

using steelyard::demo::Log;

enum class What { kRows, kEvents, kTruth };

struct Wish {
  std::string_view scenario = "basin";
  std::uint64_t seed = 1;
  What what = What::kRows;
};

std::optional<std::uint64_t> whole_number(std::string_view text) {
  std::uint64_t value = 0;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), value);
  if (error != std::errc{} || end != text.data() + text.size()) return std::nullopt;
  return value;
}

/// Nullopt, and a message on stderr, if the arguments make no sense.
std::optional<Wish> parse(int count, char** arguments) {
  Wish wish;
  for (int i = 1; i < count; ++i) {
    const std::string_view word = arguments[i];
    if (word == "--events") {
      wish.what = What::kEvents;
    } else if (word == "--truth") {
      wish.what = What::kTruth;
    } else if (word == "--seed" && i + 1 < count) {
      const auto seed = whole_number(arguments[++i]);
      if (!seed) {
        std::cerr << "--seed: is '" << arguments[i] << "'; must be a whole number from 0 to 2^64 - 1\n";
        return std::nullopt;
      }
      wish.seed = *seed;
    } else if (!word.starts_with('-')) {
      wish.scenario = word;
    } else {
      std::cerr << "unknown option '" << word << "'; known are --seed N, --events, --truth\n";
      return std::nullopt;
    }
  }
  return wish;
}

std::optional<Log> make(const Wish& wish) {
  if (wish.scenario == "basin") return steelyard::demo::make_basin_log(wish.seed);
  if (wish.scenario == "trolley") return steelyard::demo::make_trolley_log(wish.seed);
  if (wish.scenario == "cart") return steelyard::demo::make_cart_log(wish.seed);
  std::cerr << "unknown scenario '" << wish.scenario << "'; known are basin, trolley, cart\n";
  return std::nullopt;
}

bool write(Log& log, What what) {
  switch (what) {
    case What::kRows:
      return write_rows(log, std::cout);
    case What::kEvents:
      return write_events(log, std::cout);
    case What::kTruth:
      return write_truth(log, std::cout);
  }
  return false;
}

}  // namespace

int main(int count, char** arguments) {
  const auto wish = parse(count, arguments);
  if (!wish) return 2;
  auto log = make(*wish);
  if (!log) return 2;
  if (write(*log, wish->what)) return 0;
  std::cerr << "cannot write to standard output: " << std::strerror(errno) << '\n';
  return 1;
}
