// SPDX-License-Identifier: Apache-2.0
// Are the filters that the engine is judged by right themselves?
#include <gtest/gtest.h>

#include <cmath>

#include "outside/csv.h"
#include "suite/affine_filter.h"
#include "suite/filter.h"
#include "suite/score.h"
#include "suite/variational.h"

namespace steelyard::suite {
namespace {

constexpr std::uint64_t kSeed = 1;

// A random walk, with a step of one second.
FilterModel walk(double start, double start_sd, double unrest) {
  FilterModel f;
  f.start = Vector::Constant(1, start);
  f.start_sd = Vector::Constant(1, start_sd);
  f.unrest = Vector::Constant(1, unrest);
  discretise({Eigen::MatrixXd::Zero(1, 1), Eigen::MatrixXd::Zero(1, 0), Eigen::VectorXd::Zero(1)}, 1.0, f);
  f.reads = [](int, const Vector& x, RowVector& h) {
    h[0] = 1.0;
    return x[0];
  };
  return f;
}

// Closed form of the scalar Riccati equation: P = q/2 + √(q²/4 + q·r) ahead of a reading, gain P / (P + r).
TEST(Filter, GainSettlesAtTheRiccatiSolution) {
  for (const double q : {1.0, 0.01}) {
    const FilterModel model = walk(0.0, 10.0, std::sqrt(q));
    Filter filter(model, model.unrest);
    double ahead = 0.0;
    for (int i = 0; i < 1000; ++i) {
      filter.predict(Vector(0));
      ahead = filter.P(0, 0);
      filter.update(filter.expect(0).h, 0.0, 1.0);
    }
    const double riccati = 0.5 * q + std::sqrt(0.25 * q * q + q);
    EXPECT_NEAR(ahead, riccati, 1e-12) << "q " << q;
    EXPECT_NEAR(filter.P(0, 0), riccati / (riccati + 1.0), 1e-12) << "q " << q;
  }
}

// White acceleration of unit density: (T³/3 T²/2; T²/2 T).
TEST(Filter, NoiseOfAStepIsThatOfIntegratedWhiteNoise) {
  Eigen::Matrix2d A;
  A << 0, 1, 0, 0;
  const double t = 0.7;
  const Eigen::MatrixXd Q = step_noise(A, 1, t);
  EXPECT_NEAR(Q(0, 0), t * t * t / 3.0, 1e-14);
  EXPECT_NEAR(Q(0, 1), t * t / 2.0, 1e-14);
  EXPECT_NEAR(Q(1, 1), t, 1e-14);
}

TEST(Filter, AnAppendedStateLeavesNoTraceWhenItIsRemoved) {
  const Machine& m = machine("plant");
  Filter filter(m.filter, m.filter.unrest);
  filter.update(filter.expect(0).h, 1.0, 0.01);
  const Vector x = filter.x;
  const Matrix P = filter.P;
  const int first = filter.append(3.0, 4.0);
  const int second = filter.append(5.0, 6.0);
  filter.remove(first);
  EXPECT_EQ(filter.x[second - 1], 5.0);
  EXPECT_EQ(filter.P(second - 1, second - 1), 6.0);
  filter.remove(second - 1);
  EXPECT_EQ(filter.x, x);
  EXPECT_EQ(filter.P, P);
}

// Jacobians of every machine's laws, against central differences at states of a run.
TEST(Filter, JacobiansAreTheLawsSlopes) {
  constexpr double kStep = 1e-5;
  for (const Machine& m : machines()) {
    const Truth truth = m.simulate(kSeed, false);
    const Vector x = truth.state[static_cast<std::size_t>(m.steps / 2)];
    const Vector input = truth.input[0];
    Matrix F;
    Matrix unused;
    Vector moved = x;
    m.filter.move(input, moved, F);
    for (int i = 0; i < x.size(); ++i) {
      Vector up = x;
      Vector down = x;
      up[i] += kStep;
      down[i] -= kStep;
      for (int part = 0; part < m.parts(); ++part) {
        RowVector h = RowVector::Zero(x.size());
        RowVector other = h;
        m.filter.reads(part, x, h);
        const double slope =
            (m.filter.reads(part, up, other) - m.filter.reads(part, down, other)) / (2.0 * kStep);
        EXPECT_NEAR(h[i], slope, 1e-6) << m.name << " part " << part << " state " << i;
      }
      m.filter.move(input, up, unused);
      m.filter.move(input, down, unused);
      EXPECT_LT((F.col(i) - (up - down) / (2.0 * kStep)).cwiseAbs().maxCoeff(), 1e-6) << m.name;
    }
  }
}

// A set computed independently: local level, two channels of unknown precision with priors Gamma(2, 0.5), the
// paper's recursion without forgetting, iterated until it stands.
TEST(Variational, RecursionGivesTheIndependentlyComputedTrack) {
  const outside::Csv readings = outside::Csv::open("unknown_precisions_readings.csv");
  struct Known {
    std::size_t t;
    double mean, sd, precision1, precision2;
  };
  const std::array<Known, 3> known{{{1, 9.68923468233, 0.404206771527, 3.25574445335, 1.86483909173},
                                    {20, 10.4085681354, 0.204479581743, 4.14189063667, 0.284871885418},
                                    {60, 11.4753131224, 0.215851979807, 3.59816196997, 0.186405049586}}};
  const FilterModel model = walk(10.0, 1.0, 0.1);
  Filter filter(model, model.unrest);
  std::array<Learned, 2> noise{{{2.0, 0.5}, {2.0, 0.5}}};
  std::size_t next = 0;
  for (std::size_t i = 0; i < readings.rows() && next < known.size(); ++i) {
    if (i > 0) filter.predict(Vector(0));
    const Expected x = filter.expect(0);
    fuse_variationally({{x.h, readings.number(i, "y1") - x.value, &noise[0]},
                        {x.h, readings.number(i, "y2") - x.value, &noise[1]}},
                       200, filter);
    if (i + 1 != known[next].t) continue;
    EXPECT_NEAR(filter.x[0], known[next].mean, 1e-8) << "t " << i + 1;
    EXPECT_NEAR(std::sqrt(filter.P(0, 0)), known[next].sd, 1e-8) << "t " << i + 1;
    EXPECT_NEAR(noise[0].shape / noise[0].scale, known[next].precision1, 1e-7) << "t " << i + 1;
    EXPECT_NEAR(noise[1].shape / noise[1].scale, known[next].precision2, 1e-7) << "t " << i + 1;
    ++next;
  }
  EXPECT_EQ(next, known.size());
}

struct Scene {
  const Machine& m;
  Row row;
  Truth truth;
  Readings readings;
  Scene(const Machine& machine, const Row& given, std::uint64_t seed)
      : m(machine),
        truth(m.simulate(seed, given.at_rest)),
        readings(read(m, truth, row = resolved(m, given, truth), seed)) {}
  [[nodiscard]] Score score_of(Reference which) const {
    const Run run = make_run(m, row, truth, readings);
    return score(run, reference(run, which));
  }
};

TEST(References, AgreeWhereNothingIsWrong) {
  for (const Machine& m : machines()) {
    const Scene scene(m, {}, kSeed);
    const double fixed = scene.score_of(Reference::kFixed).squares;
    EXPECT_NEAR(scene.score_of(Reference::kTold).squares, fixed, 1e-9 * fixed) << m.name;
    EXPECT_NEAR(scene.score_of(Reference::kInformed).squares, fixed, 1e-9 * fixed) << m.name;
  }
}

TEST(References, CoverAsTheyStateOnMachinesThatTheyModelWell) {
  for (const char* name : {"trolley", "basin", "plant"}) {
    Score sum;
    for (std::uint64_t seed = 1; seed <= 3; ++seed)
      sum.add(Scene(machine(name), {}, seed).score_of(Reference::kTold));
    EXPECT_GT(sum.covered / sum.count, 0.90) << name;
    EXPECT_LT(sum.covered / sum.count, 0.99) << name;
  }
}

// Of informed over told, over some seeds.
double informed_over_told(const Machine& m, const Row& row) {
  Score informed;
  Score told;
  for (std::uint64_t seed = 1; seed <= 3; ++seed) {
    const Scene scene(m, row, seed);
    informed.add(scene.score_of(Reference::kInformed));
    told.add(scene.score_of(Reference::kTold));
  }
  return ratio(informed, told);
}

// To know more never hurts by more than chance.
TEST(References, InformedIsNoWorseThanTold) {
  double worst = 0.0;
  std::string where;
  for (const Machine& m : machines())
    for (const Row& row : m.rows) {
      if (row.what == Class::kAmbiguous || (row.faults.empty() && row.traits.empty())) continue;
      const double r = informed_over_told(m, row);
      if (r > worst) where = m.name + ": " + row.name;
      worst = std::max(worst, r);
      EXPECT_LT(r, 1.05) << m.name << ": " << row.name << ", seeds 1 to 3";
    }
  std::printf("informed over told at worst %.3f (%s)\n", worst, where.c_str());
}

// The first step's readings set by hand: the mid value is what a filter sees that has that reading alone, and
// the gate shuts out what lies far outside the start.
class ByHand : public ::testing::Test {
 protected:
  [[nodiscard]] Vector first(const std::array<double, 4>& values, Reference which) const {
    Readings readings;
    for (const double v : values) {
      readings.value.push_back({v});
      readings.note.push_back({Note::kFresh});
    }
    Truth truth;
    truth.input.emplace_back(0);
    Machine one = machine("trolley");
    one.steps = 1;
    const Row none;
    return reference(make_run(one, none, truth, readings), which).mean[0];
  }
};

TEST_F(ByHand, MidValueFusesTheMiddleOne) {
  EXPECT_EQ(first({9.0, 0.1, -0.1, kNoReading}, Reference::kMedian),
            first({kNoReading, 0.1, kNoReading, kNoReading}, Reference::kFixed));
}

TEST_F(ByHand, GateShutsOutWhatIsFarOff) {
  EXPECT_EQ(first({9.0, 0.1, 0.05, kNoReading}, Reference::kGated),
            first({kNoReading, 0.1, 0.05, kNoReading}, Reference::kFixed));
}

}  // namespace
}  // namespace steelyard::suite
