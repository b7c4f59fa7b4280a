// SPDX-License-Identifier: Apache-2.0
#include "judges/field.h"

#include <algorithm>
#include <array>
#include <cmath>

#include "outside/csv.h"

namespace steelyard::judges {
namespace {

using engine::AffineForm;

constexpr double kDayS = 86400.0;

engine::StateModel state(const char* name, double start, double start_sd, double unrest,
                         std::vector<double> rate) {
  engine::StateModel s;
  s.name = name;
  s.start = start;
  s.start_sd = start_sd;
  s.unrest = unrest;
  s.rate = AffineForm{std::move(rate), {}, 0.0};
  return s;
}

engine::ChannelModel thermometer(const char* name, std::vector<double> weights) {
  engine::ChannelModel c;
  c.name = name;
  c.reads = AffineForm{std::move(weights), {}, 0.0};
  c.sd = 0.007;
  c.lo = -40.0;
  c.hi = 123.8;
  c.resolution = 0.01;
  c.period_s = 5.0;
  return c;
}

struct Station {
  const char* name;
  double mean;                    // √knot, over the first four years
  double sd;                      // of what is the station's own
  std::array<double, 4> loading;  // on the four states
};

// A factor analysis (principal axes) of the square roots of the first four years, which make the winds nearly
// normal (Haslett & Raftery 1989); factors have variance 1.
constexpr std::array<Station, 12> kStations{{
    {"RPT", 3.430, 0.273, {0.703, 0.299, -0.004, 0.099}},
    {"VAL", 3.157, 0.249, {0.652, 0.177, -0.275, 0.080}},
    {"ROS", 3.365, 0.442, {0.569, 0.251, 0.149, 0.070}},
    {"KIL", 2.541, 0.231, {0.676, 0.156, 0.090, -0.065}},
    {"SHA", 3.262, 0.237, {0.678, 0.073, -0.121, -0.090}},
    {"BIR", 2.681, 0.191, {0.734, 0.007, -0.031, -0.134}},
    {"DUB", 3.146, 0.306, {0.684, -0.030, 0.246, 0.038}},
    {"CLA", 2.955, 0.258, {0.732, -0.108, -0.108, -0.059}},
    {"MUL", 2.806, 0.185, {0.692, -0.085, 0.122, -0.129}},
    {"CLO", 3.076, 0.212, {0.674, -0.151, 0.065, 0.001}},
    {"BEL", 3.575, 0.296, {0.687, -0.250, -0.218, 0.063}},
    {"MAL", 3.709, 0.381, {0.683, -0.288, 0.108, 0.152}},
}};
constexpr std::array<double, 4> kDayToDay{0.58, 0.48, 0.43,
                                          0.55};  // correlation of each state from day to day
constexpr std::array<const char*, 4> kWindStates{"wind", "south_north", "west_east", "inland"};

engine::ChannelModel gauge(const Station& station) {
  engine::ChannelModel c;
  c.name = station.name;
  c.reads = AffineForm{{station.loading.begin(), station.loading.end()}, {}, station.mean};
  c.sd = station.sd;
  c.bias_sd = 0.05;
  c.lo = 0.0;
  c.hi = 8.0;
  c.resolution = 0.0075;  // a 24th of a knot, at the winds that are usual
  c.period_s = kDayS;
  c.correlation = 0.3;  // of what is the station's own, from day to day
  return c;
}

std::vector<std::vector<double>> shown_by_stations() {
  const auto table = outside::Csv::open("irish_wind.csv");
  std::vector<std::vector<double>> out;
  for (std::size_t i = 0; i < table.rows(); ++i) {
    out.emplace_back();
    for (const auto& station : kStations) out.back().push_back(table.number(i, station.name));
  }
  return out;
}

// Covariance of what the first state leaves: the other three states' and the stations' own.
double left_between(std::size_t i, std::size_t k) {
  double sum = i == k ? kStations[i].sd * kStations[i].sd : 0.0;
  for (std::size_t s = 1; s < kWindStates.size(); ++s)
    sum += kStations[i].loading[s] * kStations[k].loading[s];
  return sum;
}

engine::ChannelModel all_gauges() {
  engine::ChannelModel all = gauge(kStations[0]);
  all.name = "gauges";
  all.correlation = 0.0;  // in time: for scalar channels alone
  for (std::size_t i = 0; i < kStations.size(); ++i) {
    engine::PartModel part = gauge(kStations[i]);
    part.reads = AffineForm{{kStations[i].loading[0]}, {}, kStations[i].mean};
    part.sd = std::sqrt(left_between(i, i));
    if (i == 0) {
      static_cast<engine::PartModel&>(all) = part;
    } else {
      all.others.push_back(part);
    }
    for (std::size_t k = i + 1; k < kStations.size(); ++k)
      all.part_correlation.push_back(left_between(i, k) / std::sqrt(left_between(i, i) * left_between(k, k)));
  }
  return all;
}

Field wind_field(const char* name, std::shared_ptr<engine::Model> model) {
  engine::set_defaults(*model, kDayS);
  for (auto& c : model->channels) c.fails_every_s = 5.0 * 365.25 * kDayS;
  Field field;
  field.name = name;
  field.unit = "knot";
  field.model = std::move(model);
  field.shown = shown_by_stations();
  field.first = 1461;
  field.onset = 1461 + 365;
  field.victims = {8, 3};  // Mullingar, among others inland; Kilkenny
  field.faults = {{Kind::kOffset, 4.0, 365, "offset 4 kn"},
                  {Kind::kDrift, 6.0 / 365.0, 730, "drift 6 kn a year"},
                  {Kind::kFreeze, 0.0, 60, "frozen"},
                  {Kind::kNoise, 4.0, 365, "noise 4 kn"},
                  {Kind::kScale, 0.6, 365, "scale x0.6"}};
  field.square_root = true;
  return field;
}

engine::StateModel wind_state(std::size_t k, std::size_t states) {
  const double rate = -std::log(kDayToDay[k]) / kDayS;
  std::vector<double> pull(states, 0.0);
  pull[k] = -rate;
  return state(kWindStates[k], 0.0, 1.0, std::sqrt(2.0 * rate), pull);
}

}  // namespace

// The rig of the thermometers test: the motes stand apart, so their difference is a state that wanders.
Field thermometers() {
  auto model = std::make_shared<engine::Model>();
  model->states = {state("temperature", 25.0, 5.0, 0.0, {0.0, 1.0, 0.0}),
                   state("trend", 0.0, 0.01, 3.5e-4, {0.0, -1.0 / 20.0, 0.0}),
                   state("gap", 0.0, 1.0, 0.0045, {0.0, 0.0, 0.0})};
  model->channels = {thermometer("mote1", {1.0, 0.0, 0.0}), thermometer("mote2", {1.0, 0.0, -1.0})};
  engine::set_defaults(*model, 20.0);
  Field field;
  field.name = "thermometers";
  field.unit = "K";
  field.model = model;
  field.period_days = 5.0 / kDayS;
  const auto table = outside::Csv::open("wsn_indoor.csv");
  for (std::size_t i = 0; i < table.rows(); ++i) {
    const auto mote1 = table.reading(i, "temp1");
    const auto mote2 = table.reading(i, "temp2");
    if (mote1 && mote2) field.shown.push_back({*mote1, *mote2});
  }
  field.first = 100;
  field.onset = 1000;
  field.victims = {0, 1};
  constexpr double kHalfHour = 0.5 / 24.0;
  field.faults = {{Kind::kOffset, 0.3, kHalfHour, "offset 0.3 K"},
                  {Kind::kDrift, 1.0 * 24.0, kHalfHour, "drift 1 K/h"},
                  {Kind::kFreeze, 0.0, kHalfHour, "frozen"},
                  {Kind::kNoise, 0.1, kHalfHour, "noise 0.1 K"},
                  {Kind::kScale, 1.02, kHalfHour, "scale x1.02"}};
  return field;
}

Field wind() {
  auto model = std::make_shared<engine::Model>();
  for (std::size_t k = 0; k < kWindStates.size(); ++k)
    model->states.push_back(wind_state(k, kWindStates.size()));
  for (const auto& station : kStations) model->channels.push_back(gauge(station));
  return wind_field("wind", model);
}

Field wind_vector() {
  auto model = std::make_shared<engine::Model>();
  model->states.push_back(wind_state(0, 1));
  model->channels.push_back(all_gauges());
  Field field = wind_field("wind as a vector", model);
  field.one_vector = true;
  return field;
}

std::string sensor_name(const Field& field, std::size_t column) {
  return field.one_vector ? kStations[column].name : field.model->channels[column].name;
}

double as_read(const Field& field, std::size_t column, double shown) {
  const auto& channels = field.model->channels;
  const engine::PartModel& part =
      field.one_vector ? channels[0].part(static_cast<int>(column)) : channels[column];
  if (field.square_root) return std::clamp(std::sqrt(std::max(shown, 0.0)), part.lo, part.hi);
  return std::clamp(std::round(shown / part.resolution) * part.resolution, part.lo, part.hi);
}

}  // namespace steelyard::judges
