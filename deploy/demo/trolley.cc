// SPDX-License-Identifier: Apache-2.0
// See trolley.h. Step 10 ms. Timeline after the start: the trolley runs from stop to stop all the time; at
// 150 s the encoder's wheel slips while it brakes and loses 0.35 m within 2 s; at 240 s it passes its
// reference mark and the count is put right.
#include "trolley.h"

#include <algorithm>
#include <array>
#include <cmath>

#include "random.h"

namespace steelyard::demo {

namespace {

constexpr std::int64_t kStartS = 1757916000;  // 2025-09-15T06:00:00Z
constexpr double kLengthS = 300.0;
constexpr double kStepS = 0.01;
constexpr double kSettlingS = 0.6;

constexpr double kSlipFromS = 150.0;
constexpr double kSlipLastsS = 2.0;
constexpr double kSlipM = 0.35;
constexpr double kReferenceAtS = 240.0;

constexpr double kEncoderBiasM = 0.004;
constexpr double kLaserBiasM = -0.002;
constexpr double kDriveBiasMS = 0.004;

/// Drives to one place after the other, as a crane driver does: full speed, slower near the place, a pause
/// there.
class Driver {
 public:
  explicit Driver(Random& random) : random_(random) {}

  double setpoint(double time_s, double position_m) {
    if (time_s >= leave_at_s_ && arrived_) {
      target_m_ = random_.uniform(3.0, 37.0);
      arrived_ = false;
    }
    const double left_m = target_m_ - position_m;
    if (!arrived_ && std::abs(left_m) < 0.05) {
      arrived_ = true;
      leave_at_s_ = time_s + random_.uniform(2.0, 6.0);
    }
    return arrived_ ? 0.0 : std::clamp(0.5 * left_m, -1.5, 1.5);
  }

 private:
  Random& random_;
  double target_m_ = 20.0;
  double leave_at_s_ = 5.0;
  bool arrived_ = true;
};

struct Trolley {
  double position_m = 20.0;
  double speed_ms = 0.0;

  void step(double setpoint_ms, double push) {
    speed_ms += (setpoint_ms - speed_ms) / kSettlingS * kStepS + 0.04 * std::sqrt(kStepS) * push;
    position_m += speed_ms * kStepS;
  }
};

double slip_m(double time_s) {
  if (time_s < kSlipFromS || time_s >= kReferenceAtS) return 0.0;
  return -kSlipM * std::min((time_s - kSlipFromS) / kSlipLastsS, 1.0);
}

void poll(Log& log, long step, double time_s, const Trolley& trolley, double setpoint_ms, Random& random) {
  const auto put = [&](std::string_view channel, double value, int decimals) {
    const std::int64_t late_ms = random.whole(1, 2);
    const std::int64_t time_ms = log.start_s * 1000 + std::llround(time_s * 1000.0) + late_ms;
    log.rows.push_back({time_ms, channel, to_counts(value, decimals), decimals});
  };
  if (step % 10 == 0)
    put("encoder", trolley.position_m + kEncoderBiasM + slip_m(time_s) + 0.002 * random.normal(), 3);
  if (step % 10 == 5) put("laser", trolley.position_m + kLaserBiasM + 0.004 * random.normal(), 3);
  if (step % 20 == 7) put("drive", trolley.speed_ms + kDriveBiasMS + 0.02 * random.normal(), 2);
  if (step % 50 == 1) put("setpoint", setpoint_ms, 3);
}

}  // namespace

Log make_trolley_log(std::uint64_t seed) {
  Log log;
  log.start_s = kStartS;
  log.events = {{kSlipFromS, kReferenceAtS, "encoder", "slip", -kSlipM}};
  log.truth.header = "time,position,speed";
  Random plant(seed, 0);
  Random sensors(seed, 1);
  Driver driver(plant);
  Trolley trolley;
  double setpoint_ms = 0.0;
  const long steps = std::lround(kLengthS / kStepS);
  for (long step = 1; step <= steps; ++step) {
    const double time_s = static_cast<double>(step) * kStepS;
    if (step % 50 == 1) setpoint_ms = driver.setpoint(time_s, trolley.position_m);
    trolley.step(setpoint_ms, plant.normal());
    poll(log, step, time_s, trolley, setpoint_ms, sensors);
    if (step % 10 == 0) log.truth.lines.push_back({time_s, trolley.position_m, trolley.speed_ms});
  }
  return log;
}

}  // namespace steelyard::demo
