// SPDX-License-Identifier: Apache-2.0
// Settled estimates of one hypothesis, against dense conditioning and published smoothing.
#include <gtest/gtest.h>

#include <Eigen/Dense>
#include <cmath>
#include <limits>
#include <map>

#include "engine/cases.h"
#include "engine/settle_kernel.h"
#include "engine/settled.h"
#include "engine/time.h"
#include "outside/csv.h"
#include "outside/machines.h"

namespace steelyard::engine {
namespace {

using outside::Csv;
using outside::kalman_model;
using outside::kSecond;
using outside::relative;

constexpr TimeNs kForEver = std::numeric_limits<TimeNs>::max();

struct Event {
  TimeNs time = 0;
  int channel = -1;  ///< −1: the input is set
  double value = 0.0;
};

/// z = [states | input | biases] at every time of an event, jointly Gaussian; readings condition it.
/// In long double, for it has digits to lose.
class Joint {
 public:
  using Vector = Eigen::Matrix<long double, Eigen::Dynamic, 1>;
  using Matrix = Eigen::Matrix<long double, Eigen::Dynamic, Eigen::Dynamic>;
  Joint(const Model& model, const std::vector<Event>& events)
      : model_(model), layout_(model), d_(layout_.fixed) {
    for (const Event& e : events)
      if (times_.empty() || times_.back() != e.time) times_.push_back(e.time);
    const auto size = static_cast<Eigen::Index>(times_.size()) * d_;
    mean_ = Vector::Zero(size);
    cov_ = Matrix::Zero(size, size);
    start();
    for (std::size_t n = 0; n < times_.size(); ++n) {
      if (n > 0) move(n);
      for (const Event& e : events) {
        if (e.time != times_[n]) continue;
        if (e.channel < 0) set_input(n, e.value);
        if (e.channel >= 0) renew_noise(n, e.channel);
      }
    }
  }

  void condition(const Event& e) {
    const auto& c = model_.channels[static_cast<std::size_t>(e.channel)];
    const auto& form = std::get<AffineForm>(c.reads);
    Vector row = Vector::Zero(mean_.size());
    const auto at = at_of(e.time);
    for (int i = 0; i < layout_.states; ++i) row(at + i) = form.on_states[static_cast<std::size_t>(i)];
    for (int i = layout_.states; i < layout_.core; ++i)
      row(at + i) = form.on_inputs[static_cast<std::size_t>(i - layout_.states)];
    const int bias = layout_.bias_at[static_cast<std::size_t>(e.channel)];
    if (bias >= 0) row(at + bias) = 1.0;
    if (layout_.colour_at[static_cast<std::size_t>(e.channel)] >= 0)
      row(at + layout_.colour_at[static_cast<std::size_t>(e.channel)]) = 1.0;
    const Vector column = cov_ * row;
    const int colour = layout_.colour_at[static_cast<std::size_t>(e.channel)];
    const long double total = row.dot(column) + (colour >= 0 ? 0.0 : c.sd * c.sd);
    mean_ += column * ((e.value - form.constant - row.dot(mean_)) / total);
    cov_ -= column * column.transpose() / total;
  }
  [[nodiscard]] double mean(TimeNs t, int i) const { return static_cast<double>(mean_(at_of(t) + i)); }
  [[nodiscard]] double sd(TimeNs t, int i) const {
    return static_cast<double>(std::sqrt(std::max(cov_(at_of(t) + i, at_of(t) + i), 0.0L)));
  }

 private:
  [[nodiscard]] Eigen::Index at_of(TimeNs t) const {
    return (std::lower_bound(times_.begin(), times_.end(), t) - times_.begin()) * d_;
  }
  void start() {
    for (int i = 0; i < layout_.states; ++i) {
      mean_(i) = model_.states[static_cast<std::size_t>(i)].start;
      cov_(i, i) = std::pow(model_.states[static_cast<std::size_t>(i)].start_sd, 2);
    }
    mean_(layout_.states) = model_.inputs[0].start;
    cov_(layout_.states, layout_.states) = std::pow(model_.inputs[0].sd, 2);
    for (std::size_t j = 0; j < model_.channels.size(); ++j)
      if (layout_.bias_at[j] >= 0)
        cov_(layout_.bias_at[j], layout_.bias_at[j]) = std::pow(model_.channels[j].bias_sd, 2);
  }
  void move(std::size_t n) {
    LinearSystem system{CoreMatrix::Zero(layout_.core, layout_.core), CoreVector::Zero(layout_.core),
                        CoreVector::Zero(layout_.core)};
    for (int i = 0; i < layout_.states; ++i) {
      const auto& s = model_.states[static_cast<std::size_t>(i)];
      const auto& form = std::get<AffineForm>(s.rate);
      for (int k = 0; k < layout_.states; ++k)
        system.rate(i, k) = form.on_states[static_cast<std::size_t>(k)];
      system.rate(i, layout_.states) = form.on_inputs[0];
      system.drive(i) = form.constant;
      system.density(i) = s.unrest * s.unrest;
    }
    Transition moved;
    discretise(system, seconds(times_[n] - times_[n - 1]), moved);
    Matrix f = Matrix::Identity(d_, d_);
    f.topLeftCorner(layout_.core, layout_.core) = moved.transition.cast<long double>();
    for (std::size_t j = 0; j < model_.channels.size(); ++j)
      if (const int at = layout_.colour_at[j]; at >= 0)
        f(at, at) = correlation_over(model_.channels[j], seconds(times_[n] - times_[n - 1]));
    Matrix noise = Matrix::Zero(d_, d_);
    noise.topLeftCorner(layout_.core, layout_.core) = moved.noise.cast<long double>();
    const auto here = static_cast<Eigen::Index>(n) * d_;
    mean_.segment(here, d_) = f * mean_.segment(here - d_, d_);
    mean_.segment(here, layout_.core) += moved.shift.cast<long double>();
    cov_.block(here, 0, d_, here) = f * cov_.block(here - d_, 0, d_, here);
    cov_.block(0, here, here, d_) = cov_.block(here, 0, d_, here).transpose();
    cov_.block(here, here, d_, d_) = f * cov_.block(here - d_, here - d_, d_, d_) * f.transpose() + noise;
  }
  // Correlated noise: what is left of it, and so much new that its variance is the datasheet's.
  void renew_noise(std::size_t n, int channel) {
    const int colour = layout_.colour_at[static_cast<std::size_t>(channel)];
    if (colour < 0) return;
    const auto& c = model_.channels[static_cast<std::size_t>(channel)];
    TimeNs& last = last_read_[channel];
    const double keeps = last == 0 ? 0.0 : correlation_over(c, seconds(times_[n] - last));
    last = times_[n];
    const auto at = static_cast<Eigen::Index>(n) * d_ + colour;
    cov_(at, at) += (1.0 - keeps * keeps) * c.sd * c.sd;
  }
  void set_input(std::size_t n, double value) {
    const auto at = static_cast<Eigen::Index>(n) * d_ + layout_.states;
    cov_.row(at).setZero();
    cov_.col(at).setZero();
    cov_(at, at) = std::pow(model_.inputs[0].sd, 2);
    mean_(at) = value;
  }

  const Model& model_;
  Layout layout_;
  Eigen::Index d_;
  std::vector<TimeNs> times_;
  std::map<int, TimeNs> last_read_;
  Vector mean_;
  Matrix cov_;
};

Model one_hypothesis(Random& random, int states) {
  Model model = *random_model(random, states, 1, 3);
  const Model plain = kalman_model();
  model.options = plain.options;
  model.jolt = plain.jolt;
  model.still = plain.still;
  // Not too unstable: the dense covariance of all times would lose its digits.
  for (std::size_t i = 0; i < model.states.size(); ++i)
    std::get<AffineForm>(model.states[i].rate).on_states[i] -= 2.0;
  return model;
}

std::vector<Event> random_events(Random& random, int moments) {
  std::vector<Event> events;
  TimeNs t = kSecond;
  for (int n = 0; n < moments; ++n) {
    t += nanoseconds(random.between(0.01, 0.7));
    if (random.uniform() < 0.3) events.push_back({t, -1, random.normal()});
    if (n > 0 && random.uniform() < 0.2) continue;  // at times an input alone
    const int first = static_cast<int>(3.0 * random.uniform());
    for (int j = first; j < 3; ++j) events.push_back({t, j, 3.0 * random.normal()});
  }
  return events;
}

void run(Engine& engine, const std::vector<Event>& events, TimeNs until = kForEver) {
  for (const Event& e : events) {
    if (e.time > until) break;
    if (e.channel < 0) {
      engine.set_input(e.time, 0, e.value, true);
    } else {
      ASSERT_EQ(engine.read(e.time, e.channel, e.value, Quality::kGood), Fate::kFused);
    }
  }
}

void expect_like_joint(const Model& model, const std::vector<Event>& events, TimeNs lag, double tolerance) {
  Settled settled(model, lag);
  run(settled.engine, events);
  settled.engine.settle_rest();
  Joint joint(model, events);
  std::size_t next = 0;
  for (const Estimate& e : settled.all) {
    for (; next < events.size() && events[next].time <= e.time_ns + lag; ++next)
      if (events[next].channel >= 0) joint.condition(events[next]);
    for (std::size_t i = 0; i < model.states.size(); ++i) {
      const double sd = joint.sd(e.time_ns, static_cast<int>(i));
      ASSERT_NEAR(e.states[i].mean, joint.mean(e.time_ns, static_cast<int>(i)), tolerance * (1.0 + sd));
      ASSERT_NEAR(e.states[i].sd, sd, tolerance * (1.0 + sd));
    }
    const int input = static_cast<int>(model.states.size());
    ASSERT_NEAR(e.inputs[0], joint.mean(e.time_ns, input), tolerance);
    ASSERT_NEAR(e.inputs_sd[0], joint.sd(e.time_ns, input), tolerance);
  }
}

TEST(Settle, OneHypothesisIsConditionedAsTheJointGaussianIs) {
  for (std::uint64_t seed = 1; seed <= 30; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Random random(seed);
    Model model = one_hypothesis(random, 1 + static_cast<int>(seed % 3));
    if (seed % 4 == 0) {
      model.channels[0].period_s = 0.3;
      model.channels[0].correlation = 0.6;
    }
    const auto events = random_events(random, 25);
    expect_like_joint(model, events, nanoseconds(random.between(0.0, 5.0)), 1e-9);
  }
}

// States without unrest, an input without uncertainty and a start that is all but known make every covariance
// singular.
TEST(Settle, SingularCovariancesAreBorne) {
  for (std::uint64_t seed = 1; seed <= 30; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Random random(seed);
    Model model = one_hypothesis(random, 3);
    model.states[seed % 3].unrest = 0.0;
    model.states[(seed + 1) % 3].unrest = 0.0;
    if (seed % 2 == 0) model.states[(seed + 2) % 3].unrest = 0.0;
    model.states[0].start_sd = 1e-9;
    model.inputs[0].sd = 0.0;
    // Looser: what is known a million times better than the rest is taken as determined by the rest.
    expect_like_joint(model, random_events(random, 25), nanoseconds(random.between(0.0, 5.0)), 1e-7);
  }
}

TEST(Settle, ASingularSolveReproducesWhatIsInReach) {
  Random random(7);
  for (int round = 0; round < 200; ++round) {
    const Eigen::Index n = 2 + round % 6;
    const Eigen::Index rank = 1 + round % n;
    Eigen::MatrixXd root(n, rank);
    for (auto& v : root.reshaped()) v = random.normal();
    for (Eigen::Index i = 0; i < n; ++i) root.row(i) *= std::pow(10.0, random.between(-6.0, 6.0));
    Eigen::MatrixXd with(3, rank);
    for (auto& v : with.reshaped()) v = random.normal();
    Eigen::MatrixXd s = root * root.transpose();
    const Eigen::MatrixXd cov = s;
    const Eigen::MatrixXd cross = with * root.transpose();
    Eigen::MatrixXd gain;
    solve_semidefinite(s, cross, gain);
    const Eigen::MatrixXd again = gain * cov;
    for (Eigen::Index k = 0; k < n; ++k)
      for (Eigen::Index i = 0; i < 3; ++i)
        ASSERT_NEAR(again(i, k), cross(i, k), 1e-6 * std::sqrt(cov(k, k)) * with.row(i).norm()) << round;
  }
}

// See tests/outside/nile_test.cc for the source and for the start after the first year.
std::vector<Estimate> nile(const Csv& table, TimeNs lag) {
  Model model = kalman_model();
  model.states = {
      outside::state("flow", table.number(0, "y"), std::sqrt(15099.0 + 1469.1), std::sqrt(1469.1), {0.0})};
  model.channels = {outside::channel("gauge", std::sqrt(15099.0), {1.0})};
  Settled settled(model, lag);
  for (std::size_t i = 1; i < table.rows(); ++i)
    outside::read(settled.engine, static_cast<TimeNs>(i + 1) * kSecond, 0, table.number(i, "y"));
  settled.engine.settle_rest();
  return settled.all;
}

TEST(Settle, NileIsSmoothedAsPublished) {
  const Csv table = Csv::open("nile_filter.csv");
  const auto all = nile(table, kForEver);
  const auto part = nile(table, 20 * kSecond);
  ASSERT_EQ(all.size(), 99U);
  ASSERT_EQ(part.size(), 99U);
  double apart = 0.0;
  for (std::size_t i = 0; i < all.size(); ++i) {
    const double mean = table.number(i + 1, "a_smooth");
    const double variance = table.number(i + 1, "P_smooth");
    EXPECT_LT(relative(all[i].states[0].mean, mean), 1e-9) << "t = " << i + 2;
    EXPECT_LT(relative(std::pow(all[i].states[0].sd, 2), variance), 1e-9) << "t = " << i + 2;
    if (i + 2 >= 80) {
      EXPECT_LT(relative(part[i].states[0].mean, mean), 1e-9) << "t = " << i + 2;
      EXPECT_LT(relative(std::pow(part[i].states[0].sd, 2), variance), 1e-9) << "t = " << i + 2;
    } else {
      apart = std::max(apart, relative(part[i].states[0].mean, mean));
    }
  }
  EXPECT_GT(apart, 1e-5) << "a lag of twenty years is not the whole series";
}

/// An affine law in a formula's clothes: it runs by regression.
class Disguised : public Formula {
 public:
  explicit Disguised(AffineForm form) : law_(std::move(form)) {}
  double evaluate(std::span<const double> states, std::span<const double> inputs, double time_s) override {
    return law_value(law_, states, inputs, time_s);
  }

 private:
  Law law_;
};

void expect_alike(const Estimate& a, const Estimate& b, double tolerance) {
  ASSERT_EQ(a.time_ns, b.time_ns);
  for (std::size_t i = 0; i < std::min(a.states.size(), b.states.size()); ++i) {
    ASSERT_NEAR(a.states[i].mean, b.states[i].mean, tolerance) << "state " << i;
    ASSERT_NEAR(a.states[i].sd, b.states[i].sd, tolerance) << "state " << i;
  }
}

TEST(Settle, RegressionGoesBackAsTheExactLawDoes) {
  Random random(5);
  Model model = one_hypothesis(random, 3);
  const auto events = random_events(random, 40);
  Settled affine(model, kSecond);
  run(affine.engine, events);
  affine.engine.settle_rest();
  model.states[1].rate = std::make_shared<Disguised>(std::get<AffineForm>(model.states[1].rate));
  Settled disguised(model, kSecond);
  run(disguised.engine, events);
  disguised.engine.settle_rest();
  ASSERT_EQ(affine.all.size(), disguised.all.size());
  for (std::size_t i = 0; i < affine.all.size(); ++i) expect_alike(affine.all[i], disguised.all[i], 1e-9);
}

// An input that is not known is an Ornstein–Uhlenbeck process: the same machine with a state that is one.
TEST(Settle, AnInputThatIsNotKnownGoesBackAsAStateWould) {
  Random random(6);
  Model model = one_hypothesis(random, 2);
  model.inputs[0].lo = -1.0;
  model.inputs[0].hi = 3.0;
  Model with_state = model;
  StateModel s;
  s.name = "unknown";
  s.start = model.inputs[0].start;
  s.start_sd = model.inputs[0].sd;
  s.unrest = std::sqrt(2.0 / model.response_s * 16.0 / 12.0);
  s.rate = AffineForm{{0, 0, -1.0 / model.response_s}, {0}, 1.0 / model.response_s};
  const auto moved = [](Law& law, double at) {
    auto& form = std::get<AffineForm>(law);
    form.on_states.push_back(at == 0.0 ? form.on_inputs[0] : at);
    form.on_inputs[0] = 0.0;
  };
  for (auto& state : with_state.states) moved(state.rate, 0.0);
  for (auto& c : with_state.channels) moved(c.reads, 0.0);
  with_state.states.push_back(s);
  std::vector<Event> events = random_events(random, 40);
  std::erase_if(events, [](const Event& e) { return e.channel < 0; });
  Settled input(model, kSecond);
  input.engine.set_input(events.front().time, 0, 0.0, false);
  Settled state(with_state, kSecond);
  for (Settled* settled : {&input, &state}) {
    run(settled->engine, events);
    settled->engine.settle_rest();
  }
  ASSERT_EQ(input.all.size(), state.all.size());
  for (std::size_t i = 0; i < input.all.size(); ++i) {
    expect_alike(input.all[i], state.all[i], 1e-9);
    ASSERT_NEAR(input.all[i].inputs[0], state.all[i].states[2].mean, 1e-9);
  }
}

}  // namespace
}  // namespace steelyard::engine
