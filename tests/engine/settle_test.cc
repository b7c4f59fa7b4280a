// SPDX-License-Identifier: Apache-2.0
// Settled estimates against dense conditioning, published smoothing, enumeration of paths, and live ones.
#include "engine/settle.h"

#include <gtest/gtest.h>

#include <Eigen/Dense>
#include <cmath>
#include <cstdio>
#include <ctime>
#include <limits>
#include <map>

#include "engine/axis.h"
#include "engine/cases.h"
#include "engine/time.h"
#include "outside/csv.h"
#include "outside/machines.h"

namespace steelyard::engine {
namespace {

using outside::Csv;
using outside::kalman_model;
using outside::kSecond;
using outside::relative;

double square(double x) { return x * x; }

constexpr TimeNs kForEver = std::numeric_limits<TimeNs>::max();

/// An engine whose settled estimates are gathered.
struct Settled {
  Settled(const Model& model, TimeNs lag, Detail detail = Detail::kBrief)
      : Settled(model, settling(lag, detail)) {}
  Settled(const Model& model, Settling s)
      : engine(std::make_shared<const Model>(model), [&] {
          s.settled = [this](const Estimate& e) { all.push_back(e); };
          return s;
        }()) {}
  Settled(const Settled&) = delete;
  static Settling settling(TimeNs lag, Detail detail) {
    Settling s;
    s.lag_ns = lag;
    s.detail = detail;
    return s;
  }
  std::vector<Estimate> all;
  Engine engine;
};

// ---- one hypothesis: the joint Gaussian of all times, conditioned densely
// ------------------------------------

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

// ---- the Nile
// ------------------------------------------------------------------------------------------------

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

// ---- switching offsets
// ---------------------------------------------------------------------------------------

/// The model of tests/outside/switching_offsets_test.cc, smoothed exactly: all condition paths of two
/// channels over eight steps, each with the joint Gaussian of x at all steps and the offsets in force.
class Paths {
 public:
  static constexpr int kPathSteps = 8;
  using Vector = Eigen::Matrix<double, kPathSteps + 2, 1>;
  using Matrix = Eigen::Matrix<double, kPathSteps + 2, kPathSteps + 2>;

  Paths(const Csv& table, std::size_t first_row)
      : table_(table),
        first_(first_row),
        log_scale_(table.number(first_row + kPathSteps - 1, "log_evidence")) {
    Node root;
    for (int i = 0; i < kPathSteps; ++i) {
      root.mean(i) = 20.0;
      for (int k = 0; k < kPathSteps; ++k) root.cov(i, k) = 1.0 + 0.0025 * std::min(i, k);
    }
    fuse(root, 0);
  }
  [[nodiscard]] double offset(int step, int channel) const { return offset_(step, channel) / total_; }
  [[nodiscard]] double mean(int step) const { return mean_(step) / total_; }
  [[nodiscard]] double variance(int step) const { return square_(step) / total_ - mean(step) * mean(step); }

 private:
  struct Node {
    double log_weight = 0.0;
    std::array<std::array<bool, 2>, kPathSteps> off{};
    Vector mean = Vector::Zero();
    Matrix cov = Matrix::Zero();
  };
  void fuse(Node& n, int step) {
    for (int c = 0; c < 2; ++c) {
      Vector row = Vector::Zero();
      row(step) = 1.0;
      if (n.off[static_cast<std::size_t>(step)][static_cast<std::size_t>(c)]) row(kPathSteps + c) = 1.0;
      const Vector column = n.cov * row;
      const double total = row.dot(column) + 0.04;
      const double e =
          table_.number(first_ + static_cast<std::size_t>(step), c ? "y2" : "y1") - row.dot(n.mean);
      n.log_weight -= 0.5 * (std::log(2.0 * M_PI * total) + e * e / total);
      n.mean += column * (e / total);
      n.cov -= column * column.transpose() / total;
    }
    if (step + 1 == kPathSteps) return gather(n);
    for (int next = 0; next < 4; ++next) fork(n, step + 1, {(next & 1) != 0, (next & 2) != 0});
  }
  void fork(const Node& from, int step, std::array<bool, 2> off) {
    Node n = from;
    n.off[static_cast<std::size_t>(step)] = off;
    for (std::size_t c = 0; c < 2; ++c) {
      const bool was = from.off[static_cast<std::size_t>(step - 1)][c];
      n.log_weight += std::log(was ? (off[c] ? 0.95 : 0.05) : (off[c] ? 0.02 : 0.98));
      if (was || !off[c]) continue;
      const auto at = kPathSteps + static_cast<Eigen::Index>(c);
      n.cov.row(at).setZero();
      n.cov.col(at).setZero();
      n.cov(at, at) = 25.0;
      n.mean(at) = 0.0;
    }
    fuse(n, step);
  }
  void gather(const Node& n) {
    const double w = std::exp(n.log_weight - log_scale_);
    total_ += w;
    for (int t = 0; t < kPathSteps; ++t) {
      mean_(t) += w * n.mean(t);
      square_(t) += w * (n.cov(t, t) + n.mean(t) * n.mean(t));
      for (std::size_t c = 0; c < 2; ++c)
        if (n.off[static_cast<std::size_t>(t)][c]) offset_(t, static_cast<Eigen::Index>(c)) += w;
    }
  }

  const Csv& table_;
  std::size_t first_;
  double log_scale_;
  double total_ = 0.0;
  Eigen::Matrix<double, kPathSteps, 1> mean_ = Eigen::Matrix<double, kPathSteps, 1>::Zero();
  Eigen::Matrix<double, kPathSteps, 1> square_ = Eigen::Matrix<double, kPathSteps, 1>::Zero();
  Eigen::Matrix<double, kPathSteps, 2> offset_ = Eigen::Matrix<double, kPathSteps, 2>::Zero();
};

Model switching_channels() {
  Model model = kalman_model();
  model.options.conditions[static_cast<std::size_t>(Condition::kOffset)] = true;
  model.response_s = 1e15;  // walks fall with it: the offset is constant
  model.states = {outside::state("x", 20.0, 1.0, 0.05, {0.0})};
  for (const char* name : {"y1", "y2"}) {
    ChannelModel c = outside::channel(name, 0.2, {1.0});
    c.fails_every_s = 1.0 / (-3.0 * std::log1p(-0.02));
    c.recovers_in_s = 1.0 / -std::log1p(-0.05);
    c.offset_size = 5.0;
    model.channels.push_back(c);
  }
  return model;
}

TEST(Settle, SwitchingOffsetsAreSmoothedAsByEnumeration) {
  const Csv table = Csv::open("offset_exact.csv");
  double worst_mean = 0.0;
  double worst_sd = 0.0;
  double worst_p = 0.0;
  double worst_onset = 0.0;
  for (std::size_t first = 0; first < table.rows(); first += Paths::kPathSteps) {
    const Paths exact(table, first);
    Settled settled(switching_channels(), kForEver);
    for (std::size_t t = 0; t < Paths::kPathSteps; ++t) {
      outside::read(settled.engine, static_cast<TimeNs>(t + 1) * kSecond, 0, table.number(first + t, "y1"));
      outside::read(settled.engine, static_cast<TimeNs>(t + 1) * kSecond, 1, table.number(first + t, "y2"));
    }
    settled.engine.settle_rest();
    ASSERT_EQ(settled.all.size(), std::size_t{Paths::kPathSteps});
    for (int t = 0; t < Paths::kPathSteps; ++t) {
      const Estimate& e = settled.all[static_cast<std::size_t>(t)];
      worst_mean = std::max(worst_mean, std::fabs(e.states[0].mean - exact.mean(t)));
      worst_sd = std::max(worst_sd, relative(e.states[0].sd, std::sqrt(exact.variance(t))));
      for (int c = 0; c < 2; ++c) {
        const double p =
            e.channels[static_cast<std::size_t>(c)].probability[static_cast<std::size_t>(Condition::kOffset)];
        // Merged: an offset that has just begun and one that was thought possible before. The future tells
        // them apart, the merged hypothesis cannot.
        const bool onset = t == 1 && exact.offset(2, c) > 0.9 && exact.offset(1, c) < 0.1;
        (onset ? worst_onset : worst_p) =
            std::max(onset ? worst_onset : worst_p, std::fabs(p - exact.offset(t, c)));
      }
    }
  }
  std::printf("worst: mean %.1e, sd %.2f %%, probability %.1e, before an onset %.1e\n", worst_mean,
              100.0 * worst_sd, worst_p, worst_onset);
  EXPECT_LE(worst_mean, 2e-3);
  EXPECT_LE(worst_sd, 0.01);
  EXPECT_LE(worst_p, 5e-3);
  EXPECT_LE(worst_onset, 0.04);
}

// ---- laws that are not affine, inputs that are not known
// ---------------------------------------------------------

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

// ---- what is settled when
// ----------------------------------------------------------------------------------------

struct AxisRun {
  AxisRun() : model(suite::axis_model({}, double_fault())), readings(axis_readings(3)) {}
  /// Steps around the fault's onset, up to and with `last`.
  [[nodiscard]] std::vector<Estimate> settle(const Settling& settling, int last = kLast) const {
    Settled settled(*model, settling);
    for (int i = kFirst; i <= last; ++i) read_moment(settled.engine, readings, i);
    settled.engine.settle_rest();
    early = settled.engine.settled_early();
    return settled.all;
  }
  static constexpr int kFirst = 940;
  static constexpr int kLast = 1060;
  static constexpr TimeNs kStep = 20'000'000;
  std::shared_ptr<Model> model;
  suite::Readings readings;
  mutable std::int64_t early = 0;
};

TEST(Settle, EachMomentHasExactlyTheReadingsOfItsLag) {
  const AxisRun axis;
  const Settling settling = Settled::settling(15 * AxisRun::kStep, Detail::kFull);
  const auto all = axis.settle(settling);
  ASSERT_EQ(all.size(), std::size_t{AxisRun::kLast - AxisRun::kFirst + 1});
  EXPECT_EQ(axis.early, 0);
  for (const int step : {940, 941, 985, 998, 1000, 1001, 1005, 1030, 1045, 1050, 1060}) {
    const auto until = axis.settle(settling, std::min(step + 15, AxisRun::kLast));
    const auto at = static_cast<std::size_t>(step - AxisRun::kFirst);
    EXPECT_EQ(all[at].time_ns, axis_time(step));
    EXPECT_TRUE(same_bits(numbers(all[at]), numbers(until[at]))) << "step " << step;
    const auto fewer = axis.settle(settling, std::min(step + 14, AxisRun::kLast));
    if (step + 15 <= AxisRun::kLast) {
      EXPECT_FALSE(same_bits(numbers(all[at]), numbers(fewer[at]))) << "step " << step;
    }
  }
}

TEST(Settle, AtALimitTheOldestIsSettledEarly) {
  const AxisRun axis;
  Settling settling = Settled::settling(10 * AxisRun::kStep, Detail::kBrief);
  const auto ten = axis.settle(settling);
  settling.lag_ns = kSecond;
  settling.max_slices = 11;
  const auto limited = axis.settle(settling);
  EXPECT_EQ(axis.early, 110);
  ASSERT_EQ(limited.size(), ten.size());
  for (std::size_t i = 0; i < ten.size(); ++i)
    EXPECT_TRUE(same_bits(numbers(limited[i]), numbers(ten[i]))) << "row " << i;
}

TEST(Settle, WithoutRoomWhatIsSettledIsWhatWasFiltered) {
  const AxisRun axis;
  Settling settling = Settled::settling(kSecond, Detail::kBrief);
  settling.max_bytes = 1;
  const auto all = axis.settle(settling);
  EXPECT_EQ(axis.early, AxisRun::kLast - AxisRun::kFirst);  // the last is not early
  Engine live(axis.model);
  for (int i = AxisRun::kFirst; i <= AxisRun::kLast; ++i) {
    read_moment(live, axis.readings, i);
    const auto a = numbers(outside::estimate(live, axis_time(i)));
    const auto b = numbers(all[static_cast<std::size_t>(i - AxisRun::kFirst)]);
    ASSERT_EQ(a.size(), b.size());
    for (std::size_t k = 0; k < a.size(); ++k) ASSERT_NEAR(a[k], b[k], 1e-11 * (1.0 + std::fabs(a[k]))) << k;
  }
}

TEST(Settle, ATenthOfTheComputeBudgetChangesNothing) {
  const AxisRun axis;
  Settling settling = Settled::settling(kSecond, Detail::kBrief);
  const auto usual = axis.settle(settling);
  settling.negligible /= 10.0;
  const auto finer = axis.settle(settling);
  double mean = 0.0;
  double sd = 0.0;
  double trust = 0.0;
  for (std::size_t i = 0; i < usual.size(); ++i) {
    for (std::size_t x = 0; x < 2; ++x) {
      mean = std::max(mean,
                      std::fabs(usual[i].states[x].mean - finer[i].states[x].mean) / finer[i].states[x].sd);
      sd = std::max(sd, relative(usual[i].states[x].sd, finer[i].states[x].sd));
    }
    for (std::size_t j = 0; j < usual[i].channels.size(); ++j)
      trust = std::max(trust, std::fabs(usual[i].channels[j].trust - finer[i].channels[j].trust));
  }
  std::printf("a tenth of the budget: mean %.1e sd, sd %.1e, trust %.1e\n", mean, sd, trust);
  EXPECT_LT(mean, 3e-3);
  EXPECT_LT(sd, 3e-3);
  EXPECT_LT(trust, 1e-3);
}

TEST(Settle, EveryTimeOfReadingHasOneEstimate) {
  Model model = kalman_model();
  model.states = {outside::state("x", 0.0, 1.0, 0.1, {0.0})};
  model.inputs = {{"u", "1", 0.0, 0.1, 0.0, -1.0, 1.0}};
  std::get<AffineForm>(model.states[0].rate).on_inputs = {1.0};
  model.channels = {outside::channel("a", 0.1, {1.0}), outside::channel("b", 0.1, {1.0})};
  for (auto& c : model.channels) std::get<AffineForm>(c.reads).on_inputs = {0.0};
  model.channels[0].lo = -5.0;
  model.channels[0].period_s = 1.0;
  Settled settled(model, kSecond / 2);
  Engine& engine = settled.engine;
  EXPECT_EQ(engine.read(1 * kSecond, 0, 0.1, Quality::kBad), Fate::kNotUsable);
  EXPECT_EQ(engine.read(2 * kSecond, 0, 0.1, Quality::kGood), Fate::kFused);
  EXPECT_EQ(engine.read(2 * kSecond, 1, 0.2, Quality::kGood), Fate::kFused);
  EXPECT_EQ(engine.read(2 * kSecond + 1, 0, 0.1, Quality::kGood), Fate::kSameMeasurement);
  engine.set_input(3 * kSecond, 0, 0.5, true);
  EXPECT_EQ(engine.read(4 * kSecond, 0, -6.0, Quality::kGood), Fate::kOutOfRange);
  engine.set_input(5 * kSecond, 0, 0.5, false);
  EXPECT_EQ(engine.read(6 * kSecond, 1, 0.7, Quality::kGood), Fate::kFused);
  EXPECT_EQ(settled.all.size(), 4U) << "all that is over half a second behind";
  engine.settle_rest();
  const std::vector<TimeNs> times{1 * kSecond, 2 * kSecond, 2 * kSecond + 1, 4 * kSecond, 6 * kSecond};
  ASSERT_EQ(settled.all.size(), times.size());
  for (std::size_t i = 0; i < times.size(); ++i) EXPECT_EQ(settled.all[i].time_ns, times[i]);
}

TEST(Settle, ACopyGoesOnWithoutSettling) {
  const AxisRun axis;
  Settled settled(*axis.model, 0);
  read_moment(settled.engine, axis.readings, 940);
  Engine copy = settled.engine;
  for (int i = 941; i < 950; ++i) read_moment(copy, axis.readings, i);
  copy.settle_rest();
  EXPECT_TRUE(settled.all.empty());
  for (int i = 941; i < 950; ++i) read_moment(settled.engine, axis.readings, i);
  EXPECT_EQ(settled.all.size(), 9U);
  EXPECT_TRUE(same_bits(numbers(outside::estimate(copy, axis_time(949))),
                        numbers(outside::estimate(settled.engine, axis_time(949)))));
}

// ---- parts of the way back
// ---------------------------------------------------------------------------------------

TEST(Settle, JacobisRotationsDiagonalise) {
  Random random(8);
  for (int round = 0; round < 100; ++round) {
    const Eigen::Index n = 1 + round % 8;
    const CoreMatrix a = random_covariance(random, static_cast<int>(n));
    CoreMatrix d = a;
    CoreMatrix v;
    diagonalise(d, v);
    EXPECT_LT((v * d.diagonal().asDiagonal() * v.transpose() - a).norm(), 1e-9 * a.norm());
    EXPECT_LT((v * v.transpose() - CoreMatrix::Identity(n, n)).norm(), 1e-13);
  }
}

// Two ancestors in one dimension, against numerical integration of what each predicted times what came after.
TEST(Settle, AncestorsAreWeighedByWhatTheyPredicted) {
  const Model model = switching_channels();
  const Layout layout(model);
  Random random(9);
  for (int round = 0; round < 200; ++round) {
    const std::array<double, 2> mean{random.normal(), random.normal()};
    const std::array<double, 2> variance{random.between(0.1, 2.0), random.between(0.1, 2.0)};
    const double share = random.between(0.05, 0.95);
    std::array<double, 2> shares{0.3 * share, 0.3 * (1.0 - share)};
    const double b = share * mean[0] + (1.0 - share) * mean[1];
    const double spread =
        share * (variance[0] + square(mean[0] - b)) + (1.0 - share) * (variance[1] + square(mean[1] - b));
    const double after = b + random.normal();
    const double left = spread * random.between(0.05, 0.95);
    std::array<double, 2> integral{};
    for (double x = -15.0; x < 15.0; x += 0.01)
      for (std::size_t i = 0; i < 2; ++i)
        integral[i] += std::exp(-0.5 * (square(x - mean[i]) / variance[i] + square(x - after) / left -
                                        square(x - b) / spread)) /
                       std::sqrt(variance[i]);
    const double expected = shares[0] * integral[0] / (shares[0] * integral[0] + shares[1] * integral[1]);
    std::array<std::array<double, 4>, 2> numbers{};
    std::array<Prospect, 2> group;
    for (std::size_t i = 0; i < 2; ++i) {
      numbers[i] = {mean[i], variance[i], 0.0, 0.0};
      group[i] = Prospect::at(numbers[i].data(), 1);
    }
    Evidence evidence(layout);
    evidence.prepare(group, shares);
    evidence.reweigh(group, &after, &left, 1, shares);
    EXPECT_NEAR(shares[0] / 0.3, expected, 1e-6) << "round " << round;
    EXPECT_NEAR(shares[0] + shares[1], 0.3, 1e-15);
    // Nothing came after: nothing changes.
    shares = {0.3 * share, 0.3 * (1.0 - share)};
    evidence.reweigh(group, &b, &spread, 1, shares);
    EXPECT_NEAR(shares[0], 0.3 * share, 1e-12);
  }
}

// ---- the suite's axis
// ----------------------------------------------------------------------------------------

struct Gain {
  double live = 0.0;  ///< sums of squared errors of the position
  double settled = 0.0;
  double live_covered = 0.0;
  double covered = 0.0;  ///< by mean ± 1.96 sd
  double speed_live = 0.0;
  double speed_settled = 0.0;
  double live_us = 0.0;  ///< a moment
  double settled_us = 0.0;
  int moments = 0;
};

void feed(Engine& engine, const suite::Readings& readings, int step) {
  for (std::size_t j = 0; j < suite::kChannels; ++j) {
    const double y = readings.value[j][static_cast<std::size_t>(step)];
    if (!std::isnan(y)) engine.read(axis_time(step), static_cast<int>(j), y, Quality::kGood);
  }
}

Gain gain(const suite::Row& row, std::uint64_t seed, int steps, Settling settling) {
  const suite::Truth truth = suite::simulate(seed);
  const suite::Readings readings = suite::read(truth, row, seed);
  const auto model = suite::axis_model({}, row);
  Gain out;
  Estimate e;
  Engine live(model);
  constexpr int kFirst = 180;
  auto begin = std::clock();
  const auto busy_us = [&] {
    return 1e6 * static_cast<double>(std::clock() - begin) / CLOCKS_PER_SEC / steps;
  };
  for (int i = 0; i < steps; ++i) {
    feed(live, readings, i);
    live.estimate(axis_time(i), Detail::kBrief, e);
    if (i < kFirst) continue;
    const double error = e.states[0].mean - truth.state[static_cast<std::size_t>(i)](0);
    out.live += square(error);
    out.speed_live += square(e.states[1].mean - truth.state[static_cast<std::size_t>(i)](1));
    out.live_covered += std::fabs(error) < 1.96 * e.states[0].sd;
  }
  out.live_us = busy_us();
  begin = std::clock();
  Settled settled(*model, settling);
  for (int i = 0; i < steps; ++i) feed(settled.engine, readings, i);
  settled.engine.settle_rest();
  out.settled_us = busy_us();
  for (int i = kFirst; i < steps; ++i) {
    const auto& s = settled.all[static_cast<std::size_t>(i)].states;
    const double error = s[0].mean - truth.state[static_cast<std::size_t>(i)](0);
    out.settled += square(error);
    out.speed_settled += square(s[1].mean - truth.state[static_cast<std::size_t>(i)](1));
    out.covered += std::fabs(error) < 1.96 * s[0].sd;
  }
  out.moments = steps - kFirst;
  return out;
}

// The whole table, three seeds and 60 s each, is in engine.md §8.
TEST(Settle, TheAxisGains) {
  const std::vector<suite::Row> rows{
      {"none", {}},
      {"offset 4 sd on a", {{0, suite::Kind::kOffset, 4.0}}},
      {"frozen a", {{0, suite::Kind::kFrozen, 0.0}}},
      {"drift 0.3 sd/s on a", {{0, suite::Kind::kDrift, 0.3}}},
      {"lag 0.5 s on a", {{0, suite::Kind::kLag, 0.5}}},
  };
  for (const auto& row : rows) {
    const Gain g = gain(row, 1, 1500, Settled::settling(2 * kSecond, Detail::kBrief));
    const double ratio = std::sqrt(g.settled / g.live);
    const double speed = std::sqrt(g.speed_settled / g.speed_live);
    const double covered = g.covered / g.moments;
    std::printf(
        "%-20s RMSE of live: position %.3f, speed %.3f; 95 %% covers %.3f (live %.3f); us a moment %.0f "
        "(%.0f)\n",
        row.name.c_str(), ratio, speed, covered, g.live_covered / g.moments, g.settled_us, g.live_us);
    EXPECT_LT(ratio, 0.8) << row.name;
    EXPECT_LT(speed, 0.7) << row.name;
    EXPECT_GT(covered, std::min(0.9, g.live_covered / g.moments)) << row.name;
    EXPECT_LT(covered, 0.99) << row.name;
  }
}

// Hindsight puts an onset where it was: live trust needs readings, settled trust does not wait.
TEST(Settle, AnOnsetIsSettledToTheMoment) {
  const suite::Row row{"offset 4 sd on a", {{0, suite::Kind::kOffset, 4.0}}};
  const suite::Readings readings = suite::read(suite::simulate(1), row, 1);
  Settled settled(*suite::axis_model({}, row), Settled::settling(2 * kSecond, Detail::kBrief));
  Estimate live;
  for (int i = 800; i < 1150; ++i) {
    feed(settled.engine, readings, i);
    if (i == 1002) settled.engine.estimate(axis_time(i), Detail::kBrief, live);
  }
  EXPECT_GT(live.channels[0].trust, 0.5);
  settled.engine.settle_rest();
  EXPECT_GT(settled.all[999 - 800].channels[0].trust, 0.9);
  EXPECT_LT(settled.all[1000 - 800].channels[0].trust, 0.01);
}

// A vector channel and a scalar one for each of two levels; the vector channel is off by 4 sd for a while.
TEST(Settle, AVectorChannelsOffsetIsSeenThrough) {
  Random random(11);
  Model model;
  for (const char* name : {"x", "y"}) {
    model.states.push_back(outside::state(name, 0.0, 1.0, 0.1, {0.0, 0.0}));
    model.channels.push_back(outside::channel(std::string("of_") + name, 0.1,
                                              {name[0] == 'x' ? 1.0 : 0.0, name[0] == 'y' ? 1.0 : 0.0}));
  }
  ChannelModel both = outside::channel("both", 0.05, {1.0, 0.0});
  PartModel second = both;
  second.reads = AffineForm{{0.0, 1.0}, {}, 0.0};
  both.others = {second};
  model.channels.push_back(both);
  for (auto& c : model.channels) {
    c.lo = -100.0;
    c.hi = 100.0;
    c.offset_size = 10.0;
    for (auto& part : c.others) part.lo = -100.0, part.hi = 100.0, part.offset_size = 10.0;
  }
  set_defaults(model, 1.0);
  ASSERT_EQ(model.problem(), "");
  Settled settled(model, 2 * kSecond);
  std::array<double, 2> truth{};
  std::vector<std::array<double, 2>> path;
  double live = 0.0;
  for (int i = 0; i < 400; ++i) {
    const TimeNs t = kSecond + i * 50'000'000LL;
    const double off = i >= 150 && i < 250 ? 0.2 : 0.0;
    for (double& x : truth) x += 0.1 * std::sqrt(0.05) * random.normal();
    path.push_back(truth);
    for (int j = 0; j < 2; ++j)
      settled.engine.read(t, j, truth[static_cast<std::size_t>(j)] + 0.1 * random.normal(), Quality::kGood);
    const std::array<double, 2> pair{truth[0] + off + 0.05 * random.normal(),
                                     truth[1] - off + 0.05 * random.normal()};
    settled.engine.read(t, 2, pair, Quality::kGood);
    const Estimate e = outside::estimate(settled.engine, t);
    live += square(e.states[0].mean - truth[0]) + square(e.states[1].mean - truth[1]);
  }
  settled.engine.settle_rest();
  ASSERT_EQ(settled.all.size(), path.size());
  double hindsight = 0.0;
  for (std::size_t i = 0; i < path.size(); ++i)
    for (std::size_t x = 0; x < 2; ++x) hindsight += square(settled.all[i].states[x].mean - path[i][x]);
  std::printf("vector channel: settled over live RMSE %.3f\n", std::sqrt(hindsight / live));
  EXPECT_LT(std::sqrt(hindsight / live), 0.85);
  EXPECT_LT(settled.all[200].channels[2].trust, 0.05);
  EXPECT_GT(settled.all[100].channels[2].trust, 0.5);
}

}  // namespace
}  // namespace steelyard::engine
