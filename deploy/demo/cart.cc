// SPDX-License-Identifier: Apache-2.0
// See cart.h. Step 20 ms. Timeline after the start: the cart goes round the yard all the time; from 200 to
// 260 s a container stands before the hall's beacon, and its signal comes by way of a wall: 1.8 m too far.
#include "cart.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>

#include "random.h"

namespace steelyard::demo {

namespace {

constexpr std::int64_t kStartS = 1758002400;  // 2025-09-16T06:00:00Z
constexpr double kLengthS = 360.0;
constexpr double kStepS = 0.02;
constexpr double kRadians = std::numbers::pi / 180.0;

constexpr double kDetourFromS = 200.0;
constexpr double kDetourToS = 260.0;
constexpr double kDetourM = 1.8;

struct Place {
  double east_m;
  double north_m;
};
constexpr Place kGate{0.0, 0.0};
constexpr Place kHall{60.0, 5.0};
constexpr Place kTank{25.0, 40.0};
constexpr std::array<Place, 4> kRound{{{10.0, 8.0}, {50.0, 10.0}, {48.0, 32.0}, {12.0, 30.0}}};

/// −180 to 180 degrees.
double turned(double degrees) { return degrees - 360.0 * std::floor((degrees + 180.0) / 360.0); }

struct Cart {
  double east_m = 12.0;
  double north_m = 30.0;
  double heading_deg = 180.0;  // clockwise from north
  double speed_ms = 0.0;
  double turn_degs = 0.0;
  std::size_t next = 0;

  void steer() {
    const double east = kRound[next].east_m - east_m;
    const double north = kRound[next].north_m - north_m;
    if (std::hypot(east, north) < 1.5) next = (next + 1) % kRound.size();
    const double off_deg = turned(std::atan2(east, north) / kRadians - heading_deg);
    const double wanted_ms = std::abs(off_deg) > 20.0 ? 0.6 : 1.5;
    speed_ms += std::clamp(wanted_ms - speed_ms, -0.5 * kStepS, 0.5 * kStepS);
    turn_degs +=
        std::clamp(std::clamp(1.5 * off_deg, -30.0, 30.0) - turn_degs, -60.0 * kStepS, 60.0 * kStepS);
  }

  void step(Random& random) {
    steer();
    const double bumps = std::sqrt(kStepS);
    heading_deg += turn_degs * kStepS + 0.4 * bumps * random.normal();
    east_m += speed_ms * std::sin(kRadians * heading_deg) * kStepS + 0.03 * bumps * random.normal();
    north_m += speed_ms * std::cos(kRadians * heading_deg) * kStepS + 0.03 * bumps * random.normal();
  }

  [[nodiscard]] double range_m(const Place& beacon) const {
    return std::hypot(east_m - beacon.east_m, north_m - beacon.north_m);
  }
};

void poll(Log& log, long step, double time_s, const Cart& cart, Random& random) {
  const auto put = [&](std::string_view channel, double value, int decimals) {
    const std::int64_t late_ms = random.whole(5, 15);
    const std::int64_t time_ms = log.start_s * 1000 + std::llround(time_s * 1000.0) + late_ms;
    log.rows.push_back({time_ms, channel, to_counts(value, decimals), decimals});
  };
  const auto range = [&](const Place& beacon) { return cart.range_m(beacon) + 0.1 * random.normal(); };
  const bool detour = time_s >= kDetourFromS && time_s < kDetourToS;
  const long phase = step % 25;  // half a second
  if (phase == 1) put("gate", range(kGate) + 0.03, 2);
  if (phase == 9) put("hall", range(kHall) - 0.04 + (detour ? kDetourM : 0.0), 2);
  if (phase == 17) put("tank", range(kTank) + 0.02, 2);
  if (phase == 3) put("speed", cart.speed_ms + 0.02 * random.normal(), 2);
  if (phase == 4) put("turn", cart.turn_degs + 0.3 * random.normal(), 1);
  if (step % 10 == 0) {
    const double shown = turned(cart.heading_deg + 0.7 + 2.0 * random.normal() - 180.0) + 180.0;
    put("compass", std::min(shown, 359.9), 1);
  }
}

}  // namespace

Log make_cart_log(std::uint64_t seed) {
  Log log;
  log.start_s = kStartS;
  log.events = {{kDetourFromS, kDetourToS, "hall", "detour", kDetourM}};
  log.truth.header = "time,east,north,heading";
  Random plant(seed, 0);
  Random sensors(seed, 1);
  Cart cart;
  const long steps = std::lround(kLengthS / kStepS);
  for (long step = 1; step <= steps; ++step) {
    const double time_s = static_cast<double>(step) * kStepS;
    cart.step(plant);
    poll(log, step, time_s, cart, sensors);
    if (step % 10 == 0) {
      log.truth.lines.push_back(
          {time_s, cart.east_m, cart.north_m, turned(cart.heading_deg - 180.0) + 180.0});
    }
  }
  return log;
}

}  // namespace steelyard::demo
