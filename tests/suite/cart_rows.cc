// SPDX-License-Identifier: Apache-2.0
// The cart's rows.
#include "suite/rows.h"

namespace steelyard::suite {

std::vector<Row> cart_rows() {
  enum { kWest, kEast, kFix, kCompass, kOdometer };
  std::vector<Row> rows;
  add_standard(rows, kWest, "west", kFix, "fix");
  rows.push_back(make_row("frozen on compass", {{kCompass, Kind::kFrozen}}));
  rows.push_back(make_row("offset 10 sd on compass", {{kCompass, Kind::kOffset, 10}}));
  rows.push_back(make_row("drift 1 sd/R on compass", {{kCompass, Kind::kDrift, 1}}, false));
  rows.push_back(make_row("lag 0.5 R on compass", {{kCompass, Kind::kLag, 0.5}}, false));
  rows.push_back(make_row("frozen on odometer", {{kOdometer, Kind::kFrozen}}));
  rows.push_back(make_row("scale x1.15 on odometer", {{kOdometer, Kind::kScale, 1.15}}, false));
  rows.push_back(make_row("10 % strays on odometer", {{kOdometer, Kind::kStrays, 20}}, false));
  rows.push_back(make_row("offset 20 sd on west from the start", {{kWest, Kind::kOffset, 20, 0, 40}}));
  rows.push_back(make_row("frozen on fix from the start", {{kFix, Kind::kFrozen, 0, 0.5, 40}}));
  Row row = make_row("frozen on west at a set-point change", {{kWest, Kind::kFrozen}});
  row.at_change = true;
  rows.push_back(row);
  rows.push_back(
      make_row("offset west + frozen odometer", {{kWest, Kind::kOffset, 20}, {kOdometer, Kind::kFrozen}}));
  rows.push_back(make_row("frozen fix + drift 1 sd/R on east",
                          {{kFix, Kind::kFrozen}, {kEast, Kind::kDrift, 1}}, false));
  row = make_row("frozen west, east (one source)", {{kWest, Kind::kFrozen}, {kEast, Kind::kFrozen}});
  row.traits = {{kWest, &Channel::source, 1}, {kEast, &Channel::source, 1}};
  row.declared.sources = true;
  rows.push_back(row);
  row = make_row("fix and compass alone: offset 20 sd on fix", {{kFix, Kind::kOffset, 20}}, false);
  row.present = {false, false, true, true, false};
  row.what = Class::kAmbiguous;
  rows.push_back(row);
  row = make_row("none, at rest, steps of 2 sd on west", {});
  row.at_rest = true;
  row.traits = {{kWest, &Channel::resolution, 0.1}};
  rows.push_back(row);
  add_trait(rows, "deadband 0.2 % on west", {kWest, &Channel::deadband, 0.3}, &Declaration::on_change);
  add_trait(rows, "damping 1 s on odometer", {kOdometer, &Channel::damping_s, 1.0},
            &Declaration::correlation);
  add_trait(rows, "time stamps out by 50 ms on west", {kWest, &Channel::time_jitter_s, 0.05},
            &Declaration::time_sd);
  add_wrong(rows, 5, kWest, kEast, "east");
  return rows;
}

}  // namespace steelyard::suite
