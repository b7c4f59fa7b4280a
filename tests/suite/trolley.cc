// SPDX-License-Identifier: Apache-2.0
// A trolley on a rail: position and speed, read at 50 Hz by three position sensors (a, b, c) and a speed
// sensor (d), moved to new set-points that no filter is told.
#include "suite/trolley.h"

#include <algorithm>
#include <cmath>

#include "suite/affine_filter.h"
#include "suite/random.h"
#include "suite/references.h"
#include "suite/rows.h"

namespace steelyard::suite {
namespace {

// Set-points every 5–11 s within ±3, reached with at most 1.2 of acceleration, a little wind besides.
Truth run_trolley(std::uint64_t seed, bool at_rest) {
  constexpr double kWind = 0.05;  // white acceleration, per √s
  Random random(seed);
  Truth truth;
  double position = 0.0;
  double speed = 0.0;
  double target = 0.0;
  double next_change = random.between(2.0, 5.0);
  for (int i = 0; i < kSteps; ++i) {
    truth.state.push_back(Eigen::Vector2d(position, speed));
    truth.input.emplace_back(0);
    if (at_rest) continue;
    if (i * kStepS >= next_change) {
      truth.changes_s.push_back(i * kStepS);
      target = random.between(-3.0, 3.0);
      next_change += random.between(5.0, 11.0);
    }
    const double push = std::clamp(1.5 * (target - position) - 2.2 * speed, -1.2, 1.2);
    const double kick = kWind * std::sqrt(kStepS) * random.normal();
    position += speed * kStepS + 0.5 * (push * kStepS + kick) * kStepS;
    speed += push * kStepS + kick;
  }
  return truth;
}

constexpr int kSpeedSensor = 3;
int state_of(int part) { return part == kSpeedSensor ? 1 : 0; }

engine::Model engine_model() {
  using engine::AffineForm;
  engine::Model model;
  model.states = {{"position", "m", 0.0, 1.0, 0.0, {}, AffineForm{{0, 1}, {}, 0}},
                  {"speed", "m/s", 0.0, 1.0, 0.22, {}, AffineForm{{0, 0}, {}, 0}}};
  model.channels.resize(4);
  for (int j = 0; j < 4; ++j) {
    AffineForm reads{{0, 0}, {}, 0};
    reads.on_states[static_cast<std::size_t>(state_of(j))] = 1.0;
    model.channels[static_cast<std::size_t>(j)].reads = reads;
  }
  return model;
}

FilterModel filter_model() {
  FilterModel f;
  f.start = Eigen::Vector2d::Zero();
  f.start_sd = Eigen::Vector2d::Ones();
  Eigen::Matrix2d A;
  A << 0, 1, 0, 0;
  discretise({A, Eigen::MatrixXd::Zero(2, 0), Eigen::Vector2d::Zero()}, kStepS, f);
  f.reads = [](int part, const Vector& x, RowVector& h) {
    h[state_of(part)] = 1.0;
    return x[state_of(part)];
  };
  // Of 0.1 to 0.7 this fits the runs without faults best (RMSE 3.008 mm; 0.30 gives the same, 0.1 3.193,
  // 0.7 3.028).
  f.unrest = Eigen::Vector2d(0.0, 0.25);
  return f;
}

}  // namespace

Machine make_trolley() {
  Machine m;
  m.name = "trolley";
  m.about = "position and speed; three position sensors and a speed sensor at 50 Hz; response time 1 s, 60 s";
  m.quick = true;
  m.response_s = 1.0;
  m.step_s = kStepS;
  m.steps = kSteps;
  m.fault_from_s = 20.0;
  m.fault_to_s = 40.0;
  m.declares_period = false;
  const auto position = [](const char* name, double sd) {
    return Channel{
        .name = name, .sd = sd, .lo = -10, .hi = 10, .resolution = 1e-4, .period_s = kStepS, .same_as = 0};
  };
  m.channels = {position("a", 0.01),
                position("b", 0.03),
                position("c", 0.05),
                {.name = "d", .sd = 0.05, .lo = -5, .hi = 5, .resolution = 1e-4, .period_s = kStepS}};
  m.judged = {{0, 0.003, 0.0}};
  m.simulate = run_trolley;
  m.shows = [](int part, const Vector& state) { return state[state_of(part)]; };
  m.engine_model = engine_model;
  m.filter = filter_model();
  m.rows = trolley_rows();
  return m;
}

Truth simulate(std::uint64_t seed) { return run_trolley(seed, false); }

Readings read(const Truth& truth, const Row& row, std::uint64_t seed) {
  const Machine& m = machine("trolley");
  return read(m, truth, resolved(m, row, truth), seed);
}

std::shared_ptr<engine::Model> axis_model(const Settings& settings, const Row& row) {
  return declare(machine("trolley"), row, settings);
}

const std::vector<Row>& table() { return machine("trolley").rows; }

Positions reference(const Readings& readings, const Row& row, bool told, double unrest) {
  Machine m = machine("trolley");
  m.filter.unrest[1] = unrest;
  Truth truth;
  truth.input.assign(kSteps, Vector(0));
  const Row fixed = resolved(m, row, truth);
  const Track track =
      reference(make_run(m, fixed, truth, readings), told ? Reference::kTold : Reference::kFixed);
  Positions out;
  for (std::size_t i = 0; i < kSteps; ++i) {
    out.position.push_back(track.mean[i][0]);
    out.sd.push_back(track.sd[i][0]);
  }
  return out;
}

double rmse(const std::vector<double>& position, const Truth& truth) {
  const int first = machine("trolley").first_judged();
  double sum = 0.0;
  for (int i = first; i < kSteps; ++i) {
    const auto u = static_cast<std::size_t>(i);
    sum += (position[u] - truth.state[u][0]) * (position[u] - truth.state[u][0]);
  }
  return std::sqrt(sum / (kSteps - first));
}

}  // namespace steelyard::suite
