// SPDX-License-Identifier: Apache-2.0
// A cart on a yard: east, north, heading and speed. Two range finders measure the distance to a mast each
// (west, east), a fix reads both coordinates at once, a compass the heading, an odometer the speed.
#include <algorithm>
#include <cmath>
#include <memory>
#include <numbers>

#include "suite/random.h"
#include "suite/rows.h"

namespace steelyard::suite {
namespace {

constexpr int kSteps = 1200;
constexpr double kStepS = 0.1;
constexpr double kTurn = 2.0 * std::numbers::pi;

enum State { kEast, kNorth, kHeading, kSpeed, kStates };
// Parts of the channels west, east, fix, compass, odometer.
enum Part { kWestRange, kEastRange, kFixEast, kFixNorth, kCompassPart, kOdometerPart };

struct Mast {
  double east;
  double north;
};
constexpr Mast kWestMast{-45.0, -25.0};
constexpr Mast kEastMast{40.0, -35.0};

double range_to(const Mast& mast, double east, double north) {
  return std::hypot(east - mast.east, north - mast.north);
}

// Drives to points within ± 25 m, turning by at most 0.7 rad/s, at speeds that change with the points; the
// ground pushes it sideways now and then.
class Driver {
 public:
  explicit Driver(std::uint64_t seed) : random_(seed * 57 + 11) {
    heading_ = random_.between(-0.4, 0.4);
    choose();
  }
  [[nodiscard]] Vector state() const { return Eigen::Vector4d(east_, north_, heading_, speed_); }

  /// True when a new point was chosen.
  bool step(double t_s) {
    const bool there = std::hypot(goal_east_ - east_, goal_north_ - north_) < 2.0 || t_s > until_s_;
    if (there) {
      choose();
      until_s_ = t_s + 25.0;
    }
    constexpr int kFine = 10;
    for (int i = 0; i < kFine; ++i) move(kStepS / kFine);
    return there;
  }

 private:
  void choose() {
    goal_east_ = random_.between(-25.0, 25.0);
    goal_north_ = random_.between(-25.0, 25.0);
    goal_speed_ = random_.between(0.8, 2.5);
  }
  void move(double dt) {
    const double wanted = std::atan2(goal_north_ - north_, goal_east_ - east_);
    const double turn = std::clamp(1.5 * std::remainder(wanted - heading_, kTurn), -0.7, 0.7);
    const double push = std::clamp(1.2 * (goal_speed_ - speed_), -0.8, 0.8);
    slide_ += -slide_ * dt / 0.5 + 0.02 * std::sqrt(dt) * random_.normal();
    east_ += (speed_ * std::cos(heading_) - slide_ * std::sin(heading_)) * dt;
    north_ += (speed_ * std::sin(heading_) + slide_ * std::cos(heading_)) * dt;
    heading_ += turn * dt + 0.03 * std::sqrt(dt) * random_.normal();
    speed_ += push * dt + 0.03 * std::sqrt(dt) * random_.normal();
  }

  Random random_;
  double east_ = 0.0, north_ = 0.0, heading_ = 0.0, speed_ = 0.0, slide_ = 0.0;
  double goal_east_ = 0.0, goal_north_ = 0.0, goal_speed_ = 0.0;
  double until_s_ = 25.0;
};

Truth run_cart(std::uint64_t seed, bool at_rest) {
  Driver driver(seed);
  Truth truth;
  for (int i = 0; i < kSteps; ++i) {
    truth.state.push_back(driver.state());
    truth.input.emplace_back(0);
    if (!at_rest && driver.step(i * kStepS)) truth.changes_s.push_back(i * kStepS);
  }
  return truth;
}

double shows(int part, const Vector& x) {
  switch (part) {
    case kWestRange:
      return range_to(kWestMast, x[kEast], x[kNorth]);
    case kEastRange:
      return range_to(kEastMast, x[kEast], x[kNorth]);
    case kFixEast:
      return x[kEast];
    case kFixNorth:
      return x[kNorth];
    case kCompassPart:
      return x[kHeading];
    default:
      return x[kSpeed];
  }
}

class Range final : public engine::Formula {
 public:
  explicit Range(const Mast& mast) : mast_(mast) {}
  double evaluate(std::span<const double> x, std::span<const double>, double) override {
    return range_to(mast_, x[kEast], x[kNorth]);
  }

 private:
  Mast mast_;
};

class Way final : public engine::Formula {
 public:
  explicit Way(bool north) : north_(north) {}
  double evaluate(std::span<const double> x, std::span<const double>, double) override {
    return x[kSpeed] * (north_ ? std::sin(x[kHeading]) : std::cos(x[kHeading]));
  }

 private:
  bool north_;
};

engine::AffineForm reads_state(int state) {
  engine::AffineForm form{std::vector<double>(kStates, 0.0), {}, 0.0};
  if (state >= 0) form.on_states[static_cast<std::size_t>(state)] = 1.0;
  return form;
}

engine::Model engine_model() {
  engine::Model model;
  const auto none = reads_state(-1);
  model.states = {{"east", "m", 0.0, 2.0, 0.01, {}, std::make_shared<Way>(false)},
                  {"north", "m", 0.0, 2.0, 0.01, {}, std::make_shared<Way>(true)},
                  {"heading", "rad", 0.0, 0.5, 0.15, {}, none},
                  {"speed", "m/s", 0.0, 1.0, 0.1, {}, none}};
  model.channels.resize(5);
  model.channels[0].reads = std::make_shared<Range>(kWestMast);
  model.channels[1].reads = std::make_shared<Range>(kEastMast);
  model.channels[2].reads = reads_state(kEast);
  model.channels[2].others.resize(1);
  model.channels[2].others[0].reads = reads_state(kNorth);
  model.channels[3].reads = reads_state(kHeading);
  model.channels[4].reads = reads_state(kSpeed);
  return model;
}

void move(const Vector&, Vector& x, Matrix& F) {
  const double c = std::cos(x[kHeading]) * kStepS;
  const double s = std::sin(x[kHeading]) * kStepS;
  F = Matrix::Identity(kStates, kStates);
  F(kEast, kHeading) = -x[kSpeed] * s;
  F(kEast, kSpeed) = c;
  F(kNorth, kHeading) = x[kSpeed] * c;
  F(kNorth, kSpeed) = s;
  x[kEast] += x[kSpeed] * c;
  x[kNorth] += x[kSpeed] * s;
}

double reads(int part, const Vector& x, RowVector& h) {
  if (part == kWestRange || part == kEastRange) {
    const Mast& mast = part == kWestRange ? kWestMast : kEastMast;
    const double range = range_to(mast, x[kEast], x[kNorth]);
    h[kEast] = (x[kEast] - mast.east) / range;
    h[kNorth] = (x[kNorth] - mast.north) / range;
    return range;
  }
  const int state = part - kFixEast;  // east, north, heading, speed stand in this order
  h[state] = 1.0;
  return x[state];
}

FilterModel filter_model() {
  FilterModel f;
  f.start = Eigen::Vector4d::Zero();
  f.start_sd = Eigen::Vector4d(2.0, 2.0, 0.5, 1.0);
  f.move = move;
  // To second order in the step.
  f.noise = [](const Vector& unrest, const Matrix& F, Matrix& Q) {
    const Matrix density = unrest.cwiseAbs2().asDiagonal();
    Q = 0.5 * kStepS * (F * density * F.transpose() + density);
  };
  f.reads = reads;
  // By --fit: error 1.225 over three runs without faults (0.02, 0.02, 0.2, 0.2 give 1.358).
  f.unrest = Eigen::Vector4d(0.005, 0.005, 0.14, 0.085);
  return f;
}

}  // namespace

Machine make_cart() {
  Machine m;
  m.name = "cart";
  m.about =
      "east, north, heading and speed, not affine; two range finders, a vector fix of both coordinates (5 "
      "Hz), a "
      "compass and an odometer at 10 Hz; response time 2 s, 2 min";
  m.quick = true;
  m.response_s = 2.0;
  m.step_s = kStepS;
  m.steps = kSteps;
  m.fault_from_s = 40.0;
  m.fault_to_s = 80.0;
  const auto range = [](const char* name, double sd) {
    return Channel{.name = name, .sd = sd, .lo = 0, .hi = 150, .resolution = 0.001, .period_s = kStepS};
  };
  m.channels = {
      range("west", 0.05),
      range("east", 0.08),
      {.name = "fix", .sd = 0.15, .lo = -80, .hi = 80, .resolution = 0.001, .period_s = 0.2, .parts = 2},
      {.name = "compass",
       .sd = 0.03,
       .lo = -0.5 * kTurn,
       .hi = 0.5 * kTurn,
       .resolution = 1e-4,
       .period_s = kStepS,
       .modulo = kTurn},
      {.name = "odometer", .sd = 0.05, .lo = -1, .hi = 5, .resolution = 0.001, .period_s = kStepS}};
  m.judged = {{kEast, 0.03, 0.0}, {kNorth, 0.03, 0.0}, {kHeading, 0.015, kTurn}, {kSpeed, 0.02, 0.0}};
  m.simulate = run_cart;
  m.shows = shows;
  m.engine_model = engine_model;
  m.filter = filter_model();
  m.rows = cart_rows();
  return m;
}

}  // namespace steelyard::suite
