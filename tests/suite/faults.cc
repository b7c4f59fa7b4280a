// SPDX-License-Identifier: Apache-2.0
#include "suite/faults.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "suite/random.h"

namespace steelyard::suite {
namespace {

constexpr double kStraysShare = 0.1;
constexpr int kHoldCounts = 2;

double round_to(double value, double step) { return step > 0.0 ? std::round(value / step) * step : value; }

// What a part of a channel needs of its past.
struct Memory {
  double held = 0.0;      // last reading before the fault
  double lagged = 0.0;    // the fault's first-order lag
  double damped = 0.0;    // the transmitter's own
  double reported = 0.0;  // last value sent
  bool begun = false;
  bool sent = false;
};

double share_of(double step_s, double time_constant_s) { return 1.0 - std::exp(-step_s / time_constant_s); }

class Sensor {
 public:
  Sensor(const Machine& machine, const Channel& channel, Random& random)
      : machine_(machine), channel_(channel), random_(random) {}

  // A part's reading under fault f (or none), unrounded.
  double faulty(const Fault* f, double x, double noise, double t_s, Memory& memory, bool wild) {
    const double sd = channel_.sd;
    if (!f) return x + noise;
    if (adds(f->kind)) return x + noise + f->size * sd * shape(*f, machine_.response_s, t_s);
    switch (f->kind) {
      case Kind::kFrozen:
        return memory.held;
      case Kind::kStuck:
        return memory.held + noise;
      case Kind::kHold:
        return memory.held + channel_.resolution * std::floor(random_.between(-kHoldCounts, kHoldCounts + 1));
      case Kind::kNoise:
        return x + noise * f->size;
      case Kind::kStrays:
        return wild ? x + random_.between(-f->size, f->size) * sd : x + noise;
      case Kind::kScale:
        return x * f->size + noise;
      case Kind::kLag:
        return memory.lagged + noise;
      case Kind::kGarbage:
        return random_.between(channel_.lo, channel_.hi);
      case Kind::kSilence:
        return kNoReading;
      default:
        return x + noise;
    }
  }

  double part(const Fault* f, double x, double jitter, double t_s, Memory& memory, bool& wild) {
    const double noise = channel_.sd * random_.normal();
    if (f && f->kind == Kind::kStrays) wild = random_.uniform() < kStraysShare;
    // A lag starts from the true value.
    if (f && f->kind == Kind::kLag)
      memory.lagged += (x - memory.lagged) * share_of(channel_.period_s, f->size * machine_.response_s);
    else
      memory.lagged = x;
    double y = faulty(f, x, noise, t_s, memory, wild) + jitter;
    if (channel_.damping_s > 0.0 && !std::isnan(y)) y = damped(y, x, noise, memory);
    if (!f) memory.held = y;
    memory.begun = true;
    return std::isnan(y) ? y : within(round_to(y, channel_.resolution));
  }

  [[nodiscard]] const Channel& channel() const { return channel_; }

 private:
  // The noise ahead of the damping is such that what comes out has the channel's sd.
  double damped(double y, double x, double noise, Memory& memory) const {
    const double share = share_of(channel_.period_s, channel_.damping_s);
    const double louder = std::sqrt((2.0 - share) / share);
    if (!memory.begun) memory.damped = x + noise;
    memory.damped += (y + noise * (louder - 1.0) - memory.damped) * share;
    return memory.damped;
  }
  [[nodiscard]] double within(double y) const {
    if (channel_.modulo > 0.0) return y - channel_.modulo * std::floor((y - channel_.lo) / channel_.modulo);
    return std::clamp(y, channel_.lo, channel_.hi);
  }

  const Machine& machine_;
  const Channel& channel_;
  Random& random_;
};

// Report by exception: a value goes out when it has moved by the deadband.
Note report(const Channel& c, Memory& memory, double& y) {
  if (std::isnan(y)) return Note::kNone;
  if (c.deadband <= 0.0) return Note::kFresh;
  if (!memory.sent || std::fabs(y - memory.reported) >= c.deadband) {
    memory.sent = true;
    memory.reported = y;
    return Note::kFresh;
  }
  y = c.holds > 0.0 ? memory.reported : kNoReading;
  return c.holds > 0.0 ? Note::kHeld : Note::kQuiet;
}

bool measures(const Machine& machine, const Channel& c, int step) {
  const int every = std::max(1, static_cast<int>(std::lround(c.period_s / machine.step_s)));
  return step % every == 0;
}

// How far a part's true value moves within an error of the time stamp.
double moved(const Machine& machine, const Truth& truth, int part, int step, double seconds) {
  if (seconds == 0.0 || step == 0) return 0.0;
  const auto u = static_cast<std::size_t>(step);
  return (machine.shows(part, truth.state[u]) - machine.shows(part, truth.state[u - 1])) / machine.step_s *
         seconds;
}

}  // namespace

bool adds(Kind kind) {
  return kind == Kind::kOffset || kind == Kind::kDrift || kind == Kind::kHum || kind == Kind::kOnOff ||
         kind == Kind::kFoam;
}

double shape(const Fault& fault, double response_s, double t_s) {
  const double since = (t_s - fault.from_s) / response_s;
  switch (fault.kind) {
    case Kind::kOffset:
      return 1.0;
    case Kind::kDrift:
      return since;
    case Kind::kHum:
      return std::sin(2.0 * std::numbers::pi * 0.7 * since);
    case Kind::kOnOff:
      return static_cast<int>(since / 2.0) % 2 == 0 ? 1.0 : 0.0;
    case Kind::kFoam:
      return 1.0 - std::exp(-since / 2.0);
    default:
      return 0.0;
  }
}

const Fault* fault_at(const Row& row, int channel, double t_s) {
  for (const auto& f : row.faults)
    if (f.channel == channel && t_s >= f.from_s && t_s < f.to_s) return &f;
  return nullptr;
}

Row resolved(const Machine& machine, const Row& row, const Truth& truth) {
  double later = 0.0;
  if (row.at_change) {
    const auto change =
        std::lower_bound(truth.changes_s.begin(), truth.changes_s.end(), machine.fault_from_s);
    if (change != truth.changes_s.end()) later = *change + 0.3 * machine.response_s - machine.fault_from_s;
  }
  Row out = row;
  for (auto& f : out.faults) {
    if (std::isnan(f.from_s)) f.from_s = machine.fault_from_s + later;
    if (std::isnan(f.to_s)) f.to_s = machine.fault_to_s + later;
  }
  return out;
}

Readings read(const Machine& machine, const Truth& truth, const Row& row, std::uint64_t seed) {
  const auto channels = channels_of(machine, row);
  const auto steps = static_cast<std::size_t>(machine.steps);
  Readings out;
  out.value.assign(static_cast<std::size_t>(machine.parts()), std::vector<double>(steps, kNoReading));
  out.note.assign(channels.size(), std::vector<Note>(steps, Note::kNone));
  Random random(seed * 7919 + 17);
  std::vector<Memory> memory(out.value.size());
  for (int i = 0; i < machine.steps; ++i) {
    const auto step = static_cast<std::size_t>(i);
    const double t_s = i * machine.step_s;
    for (std::size_t j = 0; j < channels.size(); ++j) {
      const Channel& c = channels[j];
      if (!measures(machine, c, i)) continue;
      Sensor sensor(machine, c, random);
      const Fault* f = fault_at(row, static_cast<int>(j), t_s);
      const double late_s = c.time_jitter_s > 0.0 ? c.time_jitter_s * random.normal() : 0.0;
      bool wild = false;
      Note note = Note::kNone;
      for (int p = 0; p < c.parts; ++p) {
        const int part = machine.first_part(static_cast<int>(j)) + p;
        Memory& past = memory[static_cast<std::size_t>(part)];
        double y = sensor.part(f, machine.shows(part, truth.state[step]),
                               moved(machine, truth, part, i, late_s), t_s, past, wild);
        note = report(c, past, y);
        if (row.has(static_cast<int>(j))) out.value[static_cast<std::size_t>(part)][step] = y;
      }
      if (row.has(static_cast<int>(j))) out.note[j][step] = wild ? Note::kWild : note;
    }
  }
  return out;
}

}  // namespace steelyard::suite
