// SPDX-License-Identifier: Apache-2.0
#include "suite/rows.h"

#include <algorithm>
#include <utility>

namespace steelyard::suite {
namespace {

constexpr double kCreep = 0.5;      // sd per response time
constexpr double kSlowDrift = 2.0;  // the same

Class class_of(const std::vector<Fault>& faults) {
  if (faults.empty()) return Class::kHealthy;
  if (faults.size() > 1) return Class::kPair;
  return faults[0].kind == Kind::kDrift && faults[0].size <= kCreep ? Class::kCreep : Class::kSingle;
}

// What is put on a channel: name, kind, size, and whether trust must be under 0.2 by mid-fault.
struct Standard {
  const char* name;
  Kind kind;
  double size;
  bool noticeable;
};

constexpr Standard kOnBest[] = {{"frozen", Kind::kFrozen, 0, true},
                                {"stuck with noise", Kind::kStuck, 0, true},
                                {"hold with jitter", Kind::kHold, 0, true},
                                {"offset 50 sd", Kind::kOffset, 50, true},
                                {"offset 10 sd", Kind::kOffset, 10, true},
                                {"offset 4 sd", Kind::kOffset, 4, false},
                                {"drift 5 sd/R", Kind::kDrift, 5, true},
                                {"drift 1 sd/R", Kind::kDrift, 1, true},
                                {"drift 0.3 sd/R", Kind::kDrift, 0.3, false},
                                {"drift 0.05 sd/R", Kind::kDrift, 0.05, false},
                                {"noise x2", Kind::kNoise, 2, false},
                                {"noise x10", Kind::kNoise, 10, true},
                                {"10 % strays", Kind::kStrays, 100, false},
                                {"scale x1.15", Kind::kScale, 1.15, false},
                                {"scale x0.5", Kind::kScale, 0.5, false},
                                {"lag 0.5 R", Kind::kLag, 0.5, false},
                                {"lag 2 R", Kind::kLag, 2, false},
                                {"hum 20 sd", Kind::kHum, 20, false},
                                {"garbage", Kind::kGarbage, 0, true},
                                {"silence", Kind::kSilence, 0, false}};

constexpr Standard kOnOther[] = {
    {"frozen", Kind::kFrozen, 0, true},        {"stuck with noise", Kind::kStuck, 0, true},
    {"offset 20 sd", Kind::kOffset, 20, true}, {"offset 3 sd", Kind::kOffset, 3, false},
    {"drift 1 sd/R", Kind::kDrift, 1, false},  {"drift 0.3 sd/R", Kind::kDrift, 0.3, false},
    {"noise x30", Kind::kNoise, 30, true},     {"scale x1.6", Kind::kScale, 1.6, false},
    {"scale x-1", Kind::kScale, -1, false},    {"lag 1 R", Kind::kLag, 1, false},
    {"on-off 30 sd", Kind::kOnOff, 30, false}};

void add(std::vector<Row>& rows, const Standard& s, int channel, const std::string& name) {
  rows.push_back(make_row(std::string(s.name) + " on " + name, {{channel, s.kind, s.size}}, s.noticeable));
}

}  // namespace

Row make_row(std::string name, std::vector<Fault> faults, bool noticeable) {
  Row row;
  row.name = std::move(name);
  row.what = class_of(faults);
  row.noticeable = noticeable;
  row.slow_on_best = std::any_of(faults.begin(), faults.end(), [](const Fault& f) {
    return f.channel == 0 && f.kind == Kind::kDrift && f.size <= kSlowDrift;
  });
  row.faults = std::move(faults);
  return row;
}

Row wrong_row(std::string name, Declaration declared, std::vector<Fault> faults) {
  Row row = make_row(std::move(name), std::move(faults), false);
  row.what = Class::kWrong;
  row.declared = std::move(declared);
  return row;
}

void add_standard(std::vector<Row>& rows, int best, const std::string& best_name, int other,
                  const std::string& other_name) {
  rows.push_back(make_row("none", {}));
  for (const auto& s : kOnBest) add(rows, s, best, best_name);
  for (const auto& s : kOnOther) add(rows, s, other, other_name);
}

void add_wrong(std::vector<Row>& rows, int channels, int best, int other, const std::string& other_name) {
  const auto sd_of_best = [&](double factor) {
    Declaration d;
    d.sd_factors.assign(static_cast<std::size_t>(channels), 1.0);
    d.sd_factors[static_cast<std::size_t>(best)] = factor;
    return d;
  };
  const Fault offset{other, Kind::kOffset, 10};
  rows.push_back(wrong_row("sd of the best declared half", sd_of_best(0.5)));
  rows.push_back(wrong_row("sd of the best declared double", sd_of_best(2.0)));
  rows.push_back(wrong_row("unrest / 3", {.unrest_factor = 1.0 / 3.0}));
  rows.push_back(wrong_row("unrest x 3", {.unrest_factor = 3.0}));
  rows.push_back(
      wrong_row("response / 3, offset 10 sd on " + other_name, {.response_factor = 1.0 / 3.0}, {offset}));
  rows.push_back(
      wrong_row("response x 3, offset 10 sd on " + other_name, {.response_factor = 3.0}, {offset}));
  rows.push_back(wrong_row("fails every hour, none", {.fails_every_h = 1.0}));
  rows.push_back(
      wrong_row("fails every year, offset 10 sd on " + other_name, {.fails_every_h = 8766.0}, {offset}));
}

void add_trait(std::vector<Row>& rows, const std::string& name, const Trait& trait, bool Declaration::*how) {
  Row row = wrong_row(name, {});
  row.traits = {trait};
  rows.push_back(row);
  row.name += ", declared";
  row.declared.*how = true;
  row.what = Class::kHealthy;
  rows.push_back(row);
}

}  // namespace steelyard::suite
