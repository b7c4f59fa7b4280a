// SPDX-License-Identifier: Apache-2.0
// The trolley's rows. The first 42 are the suite's oldest and stay as they are, so that figures of years can
// be compared.
#include "suite/rows.h"

namespace steelyard::suite {
namespace {

constexpr int kA = 0;
constexpr int kB = 1;
constexpr int kC = 2;
constexpr int kD = 3;

void add_single(std::vector<Row>& rows, const std::string& what, Kind kind, double size, bool on_a = true,
                bool on_d = true) {
  rows.push_back(make_row(what + " on a", {{kA, kind, size}}, on_a));
  rows.push_back(make_row(what + " on d", {{kD, kind, size}}, on_d));
}

Row among(std::vector<bool> present, Row row) {
  row.present = std::move(present);
  return row;
}

void add_oldest(std::vector<Row>& rows) {
  rows.push_back(make_row("none", {}));
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
  // A sensor that lags reads right while the machine rests, as it does at mid-fault in one seed.
  add_single(rows, "lag 0.5 s", Kind::kLag, 0.5, false, false);
  add_single(rows, "hum 20 sd 0.7 Hz", Kind::kHum, 20);
  add_single(rows, "on-off 2 s 30 sd", Kind::kOnOff, 30, false, false);
  add_single(rows, "garbage", Kind::kGarbage, 0);
  add_single(rows, "silence", Kind::kSilence, 0, false, false);
  const std::vector<bool> abd{true, true, false, true};
  const std::vector<bool> ab{true, true, false, false};
  rows.push_back(make_row("offset a + frozen d", {{kA, Kind::kOffset, 20}, {kD, Kind::kFrozen, 0}}));
  rows.push_back(make_row("frozen a + offset b", {{kA, Kind::kFrozen, 0}, {kB, Kind::kOffset, 20}}));
  rows.push_back(make_row("drift a + drift b", {{kA, Kind::kDrift, 2}, {kB, Kind::kDrift, 2, 22, 40}}));
  rows.push_back(make_row("offset 60 a + 20 b", {{kA, Kind::kOffset, 60}, {kB, Kind::kOffset, 20}}));
  rows.push_back(among(abd, make_row("a,b,d: offset a", {{kA, Kind::kOffset, 20}})));
  rows.push_back(among(abd, make_row("a,b,d: offset b", {{kB, Kind::kOffset, 20}})));
  rows.push_back(among(abd, make_row("a,b,d: drift a", {{kA, Kind::kDrift, 2}})));
  rows.push_back(among(ab, make_row("a,b: offset a", {{kA, Kind::kOffset, 20}})));
  rows.push_back(among(ab, make_row("a,b: frozen a", {{kA, Kind::kFrozen, 0}})));
}

void add_further_singles(std::vector<Row>& rows) {
  rows.push_back(make_row("offset 3 sd on a", {{kA, Kind::kOffset, 3}}, false));
  rows.push_back(make_row("offset 50 sd on a", {{kA, Kind::kOffset, 50}}));
  rows.push_back(make_row("drift 0.05 sd/s on a", {{kA, Kind::kDrift, 0.05}}, false));
  rows.push_back(make_row("drift 0.3 sd/s on b", {{kB, Kind::kDrift, 0.3}}, false));
  rows.push_back(make_row("drift 5 sd/s on a", {{kA, Kind::kDrift, 5}}));
  rows.push_back(make_row("noise x2 on a", {{kA, Kind::kNoise, 2}}, false));
  rows.push_back(make_row("noise x30 on a", {{kA, Kind::kNoise, 30}}));
  rows.push_back(make_row("scale x0.5 on a", {{kA, Kind::kScale, 0.5}}, false));
  rows.push_back(make_row("scale x1.6 on a", {{kA, Kind::kScale, 1.6}}, false));
  rows.push_back(make_row("scale x1.15 on c", {{kC, Kind::kScale, 1.15}}, false));
  rows.push_back(make_row("lag 1 s on a", {{kA, Kind::kLag, 1}}, false));
  rows.push_back(make_row("lag 2 s on a", {{kA, Kind::kLag, 2}}, false));
  rows.push_back(make_row("lag 2 s on d", {{kD, Kind::kLag, 2}}, false));
  rows.push_back(make_row("hum 5 sd 0.7 Hz on a", {{kA, Kind::kHum, 5}}, false));
  rows.push_back(make_row("hold with jitter on a", {{kA, Kind::kHold, 0}}));
  rows.push_back(make_row("hold with jitter on d", {{kD, Kind::kHold, 0}}));
}

void add_times(std::vector<Row>& rows) {
  rows.push_back(make_row("offset 20 sd on a from the start", {{kA, Kind::kOffset, 20, 0, 20}}));
  rows.push_back(make_row("frozen on d from the start", {{kD, Kind::kFrozen, 0, 0.1, 20}}));
  for (Row row : {make_row("frozen on a at a set-point change", {{kA, Kind::kFrozen, 0}}),
                  make_row("offset 10 sd on a at a set-point change", {{kA, Kind::kOffset, 10}}),
                  make_row("lag 0.5 s on d at a set-point change", {{kD, Kind::kLag, 0.5}}, false)}) {
    row.at_change = true;
    rows.push_back(row);
  }
  Row rest = make_row("none, at rest", {});
  rest.at_rest = true;
  rows.push_back(rest);
  rest.name = "none, at rest, a and b with steps of 2 sd";
  rest.traits = {{kA, &Channel::resolution, 0.02}, {kB, &Channel::resolution, 0.06}};
  rows.push_back(rest);
}

void add_groups(std::vector<Row>& rows) {
  const std::vector<bool> ab{true, true, false, false};
  // What is left reads the speed alone: nothing tells a machine that moves from a sensor that does.
  rows.push_back(make_row("frozen a, b, c", {{kA, Kind::kFrozen}, {kB, Kind::kFrozen}, {kC, Kind::kFrozen}}));
  rows.back().what = Class::kAmbiguous;
  Row source = make_row("frozen a, b (one source)", {{kA, Kind::kFrozen}, {kB, Kind::kFrozen}});
  source.traits = {{kA, &Channel::source, 1}, {kB, &Channel::source, 1}};
  source.declared.sources = true;
  rows.push_back(source);
  rows.push_back(
      make_row("lag 1 s on a + noise x10 on d", {{kA, Kind::kLag, 1}, {kD, Kind::kNoise, 10}}, false));
  rows.push_back(
      make_row("scale x1.2 on a + frozen b", {{kA, Kind::kScale, 1.2}, {kB, Kind::kFrozen}}, false));
  Row row = among(ab, make_row("a,b: drift 1 sd/s on a", {{kA, Kind::kDrift, 1}}, false));
  row.what = Class::kAmbiguous;
  rows.push_back(row);
  row = among(ab, make_row("a,b: offset 20 sd on b from the start", {{kB, Kind::kOffset, 20, 0, 60}}, false));
  row.what = Class::kAmbiguous;
  rows.push_back(row);
}

void add_traits(std::vector<Row>& rows) {
  add_trait(rows, "deadband 0.2 % on a", {kA, &Channel::deadband, 0.04}, &Declaration::on_change);
  add_trait(rows, "deadband 0.5 % on b", {kB, &Channel::deadband, 0.1}, &Declaration::on_change);
  add_trait(rows, "damping 0.2 s on b", {kB, &Channel::damping_s, 0.2}, &Declaration::correlation);
  add_trait(rows, "time stamps out by 30 ms on a", {kA, &Channel::time_jitter_s, 0.03},
            &Declaration::time_sd);
  Row held = wrong_row("deadband 0.2 % on a, held value read", {});
  held.traits = {{kA, &Channel::deadband, 0.04}, {kA, &Channel::holds, 1.0}};
  rows.push_back(held);
}

}  // namespace

std::vector<Row> trolley_rows() {
  std::vector<Row> rows;
  add_oldest(rows);
  add_further_singles(rows);
  add_times(rows);
  add_groups(rows);
  add_traits(rows);
  add_wrong(rows, 4, kA, kB, "b");
  return rows;
}

}  // namespace steelyard::suite
