// SPDX-License-Identifier: Apache-2.0
#include "suite/faults.h"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace steelyard::suite {
namespace {

std::string label(const char* what, int channel) {
  return std::string(what) + " on " + kNames[static_cast<std::size_t>(channel)];
}

void add_single(std::vector<Row>& rows, const char* what, Kind kind, double size, bool on_a = true,
                bool on_d = true) {
  rows.push_back({label(what, 0), {{0, kind, size}}, {true, true, true, true}, on_a});
  rows.push_back({label(what, 3), {{3, kind, size}}, {true, true, true, true}, on_d});
}

std::vector<Row> make_table() {
  std::vector<Row> rows;
  rows.push_back({"none", {}, {true, true, true, true}, true});
  add_single(rows, "frozen", Kind::kFrozen, 0);
  add_single(rows, "stuck with noise", Kind::kStuck, 0);
  add_single(rows, "offset 20 sd", Kind::kOffset, 20);
  add_single(rows, "offset 4 sd", Kind::kOffset, 4);
  add_single(rows, "drift 2 sd/s", Kind::kDrift, 2);
  add_single(rows, "drift 0.3 sd/s", Kind::kDrift, 0.3);
  add_single(rows, "drift 0.1 sd/s", Kind::kDrift, 0.1, false, false);
  add_single(rows, "noise x10", Kind::kNoise, 10);
  add_single(rows, "10 % strays", Kind::kStrays, 100, false, false);
  add_single(rows, "scale x1.2", Kind::kScale, 1.2, true, false);
  add_single(rows, "scale x-1", Kind::kScale, -1, true, false);
  add_single(rows, "lag 0.5 s", Kind::kLag, 0.5, true, false);
  add_single(rows, "hum 20 sd 0.7 Hz", Kind::kHum, 20);
  add_single(rows, "on-off 2 s 30 sd", Kind::kOnOff, 30, false, false);
  add_single(rows, "garbage", Kind::kGarbage, 0);
  add_single(rows, "silence", Kind::kSilence, 0, false, false);
  const std::array<bool, 4> all{true, true, true, true};
  const std::array<bool, 4> abd{true, true, false, true};
  const std::array<bool, 4> ab{true, true, false, false};
  rows.push_back({"offset a + frozen d", {{0, Kind::kOffset, 20}, {3, Kind::kFrozen, 0}}, all, true});
  rows.push_back({"frozen a + offset b", {{0, Kind::kFrozen, 0}, {1, Kind::kOffset, 20}}, all, true});
  rows.push_back({"drift a + drift b", {{0, Kind::kDrift, 2}, {1, Kind::kDrift, 2, 22, 40}}, all, true});
  rows.push_back({"offset 60 a + 20 b", {{0, Kind::kOffset, 60}, {1, Kind::kOffset, 20}}, all, true});
  rows.push_back({"a,b,d: offset a", {{0, Kind::kOffset, 20}}, abd, true});
  rows.push_back({"a,b,d: offset b", {{1, Kind::kOffset, 20}}, abd, true});
  rows.push_back({"a,b,d: drift a", {{0, Kind::kDrift, 2}}, abd, true});
  rows.push_back({"a,b: offset a", {{0, Kind::kOffset, 20}}, ab, true});
  rows.push_back({"a,b: frozen a", {{0, Kind::kFrozen, 0}}, ab, true});
  return rows;
}

double round_to(double value, double step) { return std::round(value / step) * step; }

// A fault's own memory: what it needs of the past.
struct Memory {
  double held = 0.0;
  double lagged = 0.0;
  bool begun = false;
};

double faulty(const Fault& f, double truth, double noise, double t, Memory& memory, Random& random,
              bool& wild) {
  const auto j = static_cast<std::size_t>(f.channel);
  const double sd = kSd[j];
  const double since = t - f.from_s;
  switch (f.kind) {
    case Kind::kNone:
      return truth + noise;
    case Kind::kFrozen:
      return memory.held;
    case Kind::kStuck:
      return memory.held + noise;
    case Kind::kOffset:
      return truth + noise + f.size * sd;
    case Kind::kDrift:
      return truth + noise + f.size * sd * since;
    case Kind::kNoise:
      return truth + noise * f.size;
    case Kind::kStrays:
      wild = random.uniform() < 0.1;
      return wild ? truth + random.between(-f.size, f.size) * sd : truth + noise;
    case Kind::kScale:
      return truth * f.size + noise;
    case Kind::kLag:
      return memory.lagged + noise;
    case Kind::kHum:
      return truth + noise + f.size * sd * std::sin(2 * std::numbers::pi * 0.7 * since);
    case Kind::kOnOff:
      return truth + noise + (static_cast<int>(since / 2.0) % 2 == 0 ? f.size * sd : 0.0);
    case Kind::kGarbage:
      return random.between(-kRange[j], kRange[j]);
    case Kind::kSilence:
      return kNoReading;
  }
  return truth + noise;
}

}  // namespace

const std::vector<Row>& table() {
  static const std::vector<Row> rows = make_table();
  return rows;
}

const Fault* fault_at(const Row& row, int channel, int step) {
  const double t = step * kStepS;
  for (const auto& f : row.faults)
    if (f.channel == channel && t >= f.from_s && t < f.to_s) return &f;
  return nullptr;
}

Readings read(const Truth& truth, const Row& row, std::uint64_t seed) {
  Readings out;
  Random random(seed * 7919 + 17);
  std::array<Memory, kChannels> memory;
  for (int i = 0; i < kSteps; ++i) {
    for (int j = 0; j < kChannels; ++j) {
      const auto u = static_cast<std::size_t>(j);
      const double noise = kSd[u] * random.normal();
      const double x = truth.of(j, i);
      const Fault* f = fault_at(row, j, i);
      bool wild = false;
      // A first-order lag (instrument damping) starts from the true value.
      if (f && f->kind == Kind::kLag)
        memory[u].lagged += (x - memory[u].lagged) * (1.0 - std::exp(-kStepS / f->size));
      else
        memory[u].lagged = x;
      double y = f ? faulty(*f, x, noise, i * kStepS, memory[u], random, wild) : x + noise;
      if (!f) memory[u].held = y;
      if (!std::isnan(y)) y = std::clamp(round_to(y, kResolution), -kRange[u], kRange[u]);
      if (!row.present[u]) y = kNoReading;
      out.value[u].push_back(y);
      out.wild[u].push_back(wild);
    }
  }
  return out;
}

}  // namespace steelyard::suite
