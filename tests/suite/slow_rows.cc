// SPDX-License-Identifier: Apache-2.0
// Rows of the slow machines, the basin and the plant.
#include "suite/rows.h"

namespace steelyard::suite {
namespace {

constexpr double kMinute = 60.0;

Row at_change(Row row) {
  row.at_change = true;
  return row;
}

}  // namespace

std::vector<Row> basin_rows() {
  constexpr int kRadar = 0;
  constexpr int kSonic = 1;
  constexpr int kCell = 2;
  constexpr int kMeter = 3;
  std::vector<Row> rows;
  add_standard(rows, kRadar, "radar", kMeter, "meter");
  rows.push_back(make_row("drift 0.3 sd/R on cell", {{kCell, Kind::kDrift, 0.3}}, false));
  rows.push_back(make_row("offset 20 sd on radar from the start", {{kRadar, Kind::kOffset, 20, 0, 2400}}));
  rows.push_back(make_row("frozen on cell from the start", {{kCell, Kind::kFrozen, 0, 5, 2400}}));
  rows.push_back(at_change(make_row("frozen on radar at a set-point change", {{kRadar, Kind::kFrozen}})));
  rows.push_back(
      at_change(make_row("offset 10 sd on sonic at a set-point change", {{kSonic, Kind::kOffset, 10}})));
  const std::vector<Fault> foam{{kRadar, Kind::kFoam, 30}, {kSonic, Kind::kFoam, 25}};
  rows.push_back(make_row("foam on radar and sonic", foam, false));
  Row row = make_row("foam on radar and sonic, declared", foam, false);
  row.declared.common = {kRadar, kSonic};
  rows.push_back(row);
  row = make_row("frozen radar, sonic (one source)", {{kRadar, Kind::kFrozen}, {kSonic, Kind::kFrozen}});
  row.traits = {{kRadar, &Channel::source, 1}, {kSonic, &Channel::source, 1}};
  row.declared.sources = true;
  rows.push_back(row);
  rows.push_back(make_row("frozen radar + drift 1 sd/R on cell",
                          {{kRadar, Kind::kFrozen}, {kCell, Kind::kDrift, 1}}, false));
  rows.push_back(
      make_row("offset radar + frozen meter", {{kRadar, Kind::kOffset, 20}, {kMeter, Kind::kFrozen}}));
  for (const double size : {1.0, 20.0}) {
    const bool drift = size < 2.0;
    row = make_row(
        drift ? "radar, cell alone: drift 1 sd/R on radar" : "radar, cell alone: offset 20 sd on cell",
        {{drift ? kRadar : kCell, drift ? Kind::kDrift : Kind::kOffset, size}}, false);
    row.present = {true, false, true, false};
    if (drift) row.what = Class::kAmbiguous;
    rows.push_back(row);
  }
  row = make_row("none, at rest, steps of 2 sd on radar and cell", {});
  row.at_rest = true;
  row.traits = {{kRadar, &Channel::resolution, 0.006}, {kCell, &Channel::resolution, 0.012}};
  rows.push_back(row);
  add_trait(rows, "deadband 0.2 % on radar", {kRadar, &Channel::deadband, 0.012}, &Declaration::on_change);
  add_trait(rows, "deadband 0.5 % on sonic", {kSonic, &Channel::deadband, 0.03}, &Declaration::on_change);
  add_trait(rows, "damping 3 s on radar", {kRadar, &Channel::damping_s, 3.0}, &Declaration::correlation);
  add_trait(rows, "damping 30 s on cell", {kCell, &Channel::damping_s, 0.5 * kMinute},
            &Declaration::correlation);
  row = wrong_row("deadband 0.2 % on radar, held value read", {});
  row.traits = {{kRadar, &Channel::deadband, 0.012}, {kRadar, &Channel::holds, 1.0}};
  rows.push_back(row);
  add_wrong(rows, 4, kRadar, kSonic, "sonic");
  return rows;
}

std::vector<Row> plant_rows() {
  enum { kP1, kP2, kP3, kJ1, kJ2, kWall, kOut, kRoom };
  std::vector<Row> rows;
  add_standard(rows, kP1, "p1", kJ1, "j1");
  rows.push_back(make_row("drift 0.3 sd/R on p2", {{kP2, Kind::kDrift, 0.3}}, false));
  rows.push_back(make_row("offset 10 sd on wall", {{kWall, Kind::kOffset, 10}}));
  rows.push_back(make_row("lag 2 R on out", {{kOut, Kind::kLag, 2}}, false));
  rows.push_back(make_row("frozen on room", {{kRoom, Kind::kFrozen}}, false));
  rows.push_back(make_row("offset 20 sd on p1 from the start", {{kP1, Kind::kOffset, 20, 0, 3600}}));
  rows.push_back(at_change(make_row("frozen on p1 at a set-point change", {{kP1, Kind::kFrozen}})));
  rows.push_back(at_change(make_row("offset 10 sd on j1 at a set-point change", {{kJ1, Kind::kOffset, 10}})));
  rows.push_back(
      make_row("offset p1 + offset p2", {{kP1, Kind::kOffset, 20}, {kP2, Kind::kOffset, 10, 3720}}));
  rows.push_back(
      make_row("drift 1 sd/R p1 + frozen j1", {{kP1, Kind::kDrift, 1}, {kJ1, Kind::kFrozen}}, false));
  rows.push_back(make_row("offset j1 + noise x10 on p1 + frozen out",
                          {{kJ1, Kind::kOffset, 20}, {kP1, Kind::kNoise, 10}, {kOut, Kind::kFrozen}}));
  Row row = make_row("frozen p1, p2, p3 (one source)",
                     {{kP1, Kind::kFrozen}, {kP2, Kind::kFrozen}, {kP3, Kind::kFrozen}});
  row.traits = {{kP1, &Channel::source, 1}, {kP2, &Channel::source, 1}, {kP3, &Channel::source, 1}};
  row.declared.sources = true;
  rows.push_back(row);
  row = make_row("p1 and j1 alone: offset 20 sd on p1", {{kP1, Kind::kOffset, 20}}, false);
  row.present = {true, false, false, true, false, false, false, false};
  rows.push_back(row);
  row = make_row("none, at rest, steps of 2 sd on p1 and j1", {});
  row.at_rest = true;
  row.traits = {{kP1, &Channel::resolution, 0.2}, {kJ1, &Channel::resolution, 0.4}};
  rows.push_back(row);
  add_trait(rows, "deadband 0.2 % on p1", {kP1, &Channel::deadband, 0.4}, &Declaration::on_change);
  add_trait(rows, "deadband 0.5 % on p1", {kP1, &Channel::deadband, 1.0}, &Declaration::on_change);
  add_trait(rows, "damping 30 s on p1", {kP1, &Channel::damping_s, 30.0}, &Declaration::correlation);
  add_wrong(rows, 8, kP1, kP2, "p2");
  return rows;
}

}  // namespace steelyard::suite
