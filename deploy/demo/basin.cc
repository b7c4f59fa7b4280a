// SPDX-License-Identifier: Apache-2.0
// Runs the plant and lets the transmitters look at it, each at its own moments. See basin.h; what happens
// when is listed at the head of generate.cc.
#include "basin.h"

#include <algorithm>
#include <array>
#include <cmath>

#include "basin_faults.h"
#include "basin_plant.h"
#include "basin_sensors.h"

namespace steelyard::demo {

namespace {

using namespace basin;

constexpr double kStartLevelM = 1.135;
constexpr long kStepsPerS = 10;

// Step of each second at which a signal is polled.
constexpr long kSonicPhase = 0;
constexpr long kRadarPhase = 2;
constexpr long kCellPhase = 5;
constexpr long kPumpPhase = 7;

/// Writes readings with the stamp of the box that polled them, 50 to 200 ms late.
class Recorder {
 public:
  Recorder(Log& log, std::uint64_t seed) : log_(log), random_(seed, 5) {}

  void put(double time_s, std::string_view channel, std::int64_t counts, int decimals) {
    const std::int64_t late_ms = random_.whole(50, 200);
    const std::int64_t time_ms = log_.start_s * 1000 + std::llround(time_s * 1000.0) + late_ms;
    log_.rows.push_back({time_ms, channel, counts, decimals});
  }

  /// Steps until the meter reports again: 2 to 5 s.
  long meter_pause() { return random_.whole(20, 50); }

 private:
  Log& log_;
  Random random_;
};

/// Notes what the plant does by itself: pumps switching (each over within a ramp), the weir overflowing.
class Observer {
 public:
  explicit Observer(Log& log) : log_(log) {}

  void look(const Plant& plant) {
    for (int i = 0; i < 2; ++i) {
      const bool on = plant.pumps().wanted(i);
      bool& was_on = was_on_.at(static_cast<std::size_t>(i));
      if (on != was_on)
        log_.events.push_back(
            {plant.time_s(), plant.time_s() + 12.0, "plant", on ? "pump starts" : "pump stops", kPumpM3S});
      was_on = on;
    }
    look_at_weir(plant);
  }

 private:
  void look_at_weir(const Plant& plant) {
    peak_ = std::max(peak_, plant.overflow_m3s());
    const bool over = plant.overflow_m3s() > 0.0;
    if (over && !was_over_) over_from_ = plant.time_s();
    if (!over && was_over_) log_.events.push_back({over_from_, plant.time_s(), "plant", "overflow", peak_});
    was_over_ = over;
  }

  Log& log_;
  std::array<bool, 2> was_on_{};
  bool was_over_ = false;
  double over_from_ = 0.0;
  double peak_ = 0.0;
};

/// All transmitters with the clock of the one that has none of its own.
class Sensors {
 public:
  explicit Sensors(std::uint64_t seed) : sonic_(seed), radar_(seed), cell_(seed), meter_(seed) {}

  void poll(long step, const Plant& plant, Recorder& recorder) {
    const double now_s = plant.time_s();
    const long phase = step % kStepsPerS;
    if (phase == kSonicPhase) recorder.put(now_s, "sonic", sonic_.read(plant), kLevelDecimals);
    if (phase == kRadarPhase) recorder.put(now_s, "radar", radar_.read(plant), kLevelDecimals);
    if (phase == kCellPhase) recorder.put(now_s, "cell", cell_.read(plant), kLevelDecimals);
    if (phase == kPumpPhase) {
      recorder.put(now_s, "pump", to_counts(plant.pumps().reported_m3s(), kFlowDecimals), kFlowDecimals);
    }
    if (step >= meter_due_) {
      recorder.put(now_s, "meter", meter_.read(plant), kFlowDecimals);
      meter_due_ = step + recorder.meter_pause();
    }
  }

 private:
  Sonic sonic_;
  Radar radar_;
  Cell cell_;
  Meter meter_;
  long meter_due_ = 0;
};

/// A held or frozen reading is wrong by as much as the level has moved since; storms are as big as their
/// inflow.
void fill_sizes(Log& log) {
  const auto line = [&](double time_s) -> const std::vector<double>& {
    const auto last = static_cast<double>(log.truth.lines.size() - 1);
    return log.truth.lines[static_cast<std::size_t>(std::clamp(time_s - 1.0, 0.0, last))];
  };
  for (Event& event : log.events) {
    const bool holds = event.kind == "frozen" || event.kind.starts_with("held");
    if (!holds && event.kind != "storm") continue;
    for (double t = event.from_s; t < event.to_s; t += 1.0) {
      const double size = holds ? line(event.from_s)[1] - line(t)[1] : line(t)[2];
      if (std::abs(size) > std::abs(event.size)) event.size = size;
    }
  }
}

}  // namespace

Log make_basin_log(std::uint64_t seed) {
  Log log;
  log.start_s = kLogStartS;
  log.events = scripted_events();
  log.truth.header = "time,level,inflow,pump,overflow";
  Plant plant(seed, kUpsets, kStartLevelM);
  Sensors sensors(seed);
  Recorder recorder(log, seed);
  Observer observer(log);
  const long steps = std::lround(kLogLengthS / kStepS);
  for (long step = 1; step <= steps; ++step) {
    plant.step();
    sensors.poll(step, plant, recorder);
    observer.look(plant);
    if (step % kStepsPerS == 0) {
      log.truth.lines.push_back({plant.time_s(), plant.level_m(), plant.inflow_m3s(),
                                 plant.pumps().delivered_m3s(), plant.overflow_m3s()});
    }
  }
  fill_sizes(log);
  return log;
}

}  // namespace steelyard::demo
