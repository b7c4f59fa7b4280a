// SPDX-License-Identifier: Apache-2.0
// Prediction: formulas that happen to be affine move as affine laws do, unknown inputs spread over their
// range.
#include "engine/motion.h"

#include <gtest/gtest.h>

#include <cmath>

#include "engine/cases.h"
#include "engine/projection.h"

namespace steelyard::engine {
namespace {

struct AffineFormula : Formula {
  explicit AffineFormula(AffineForm f) : form(std::move(f)) {}
  double evaluate(std::span<const double> states, std::span<const double> inputs, double) override {
    double sum = form.constant;
    for (std::size_t i = 0; i < states.size(); ++i) sum += form.on_states[i] * states[i];
    for (std::size_t i = 0; i < inputs.size(); ++i) sum += form.on_inputs[i] * inputs[i];
    return sum;
  }
  AffineForm form;
};

Law as_formula(const Law& law) { return std::make_shared<AffineFormula>(std::get<AffineForm>(law)); }

constexpr TimeNs kSecond = 1'000'000'000;

TEST(Motion, FormulaThatIsAffineMovesAsTheAffineLaw) {
  for (std::uint64_t seed = 1; seed <= 20; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Random random(seed);
    Scene affine(random_model(random, 3, 2, 3));
    auto model = std::make_shared<Model>(*affine.model);
    for (auto& s : model->states) s.rate = as_formula(s.rate);
    Scene general(model);
    Hypothesis& a = affine.random_hypothesis(random, {{1, Condition::kOffset}});
    Hypothesis& b = general.pool.append_copy(a);
    Walks density{};
    density.own[2].fill(0.3);
    for (Scene* scene : {&affine, &general}) {
      Motion motion(*scene->model, scene->layout);
      EXPECT_EQ(motion.affine(), scene == &affine);
      motion.prepare(kSecond, kSecond + 300'000'000, 0);
      motion.predict({&scene->pool[0], 1}, density);
    }
    EXPECT_LT((mean_of(a) - mean_of(b)).norm(), 1e-9 * (1.0 + mean_of(a).norm()));
    EXPECT_LT((covariance_of(a) - covariance_of(b)).norm(), 1e-9 * (1.0 + covariance_of(a).norm()));
  }
}

TEST(Motion, WalksAndModesSpreadTheirOwnPart) {
  Random random(5);
  Scene scene(random_model(random, 2, 0, 2));
  for (auto& s : scene.model->states) s.rate = AffineForm{{0.0, 0.0}, {}, 0.0};
  Hypothesis& usual = scene.random_hypothesis(random, {{0, Condition::kWandering}});
  Hypothesis& jolted = scene.pool.append_copy(usual);
  jolted.mode = Mode::kJolted;
  const int own = usual.own_at[0];
  const double state_before = usual.p(0, 0);
  const double own_before = usual.p(own, own);
  Walks density{};
  density.own[static_cast<std::size_t>(Condition::kWandering)][0] = 0.25;
  Motion motion(*scene.model, scene.layout);
  motion.prepare(0, 4 * kSecond, 0);
  motion.predict({&usual, 2}, density);
  const double unrest = scene.model->states[0].unrest;
  EXPECT_NEAR(usual.p(own, own) - own_before, 1.0, 1e-12);
  EXPECT_NEAR(usual.p(0, 0) - state_before, 4.0 * unrest * unrest, 1e-12);
  EXPECT_NEAR(jolted.p(0, 0) - state_before, 4.0 * unrest * unrest * 4.5 * 4.5, 1e-12);
}

TEST(Motion, UnknownInputEndsAsUniformAsItsRange) {
  Random random(6);
  Scene scene(random_model(random, 2, 1, 2));
  for (auto& s : scene.model->states) s.rate = AffineForm{{0.0, 0.0}, {0.0}, 0.0};
  scene.model->inputs[0].lo = 2.0;
  scene.model->inputs[0].hi = 8.0;
  Hypothesis& h = scene.random_hypothesis(random);
  Motion motion(*scene.model, scene.layout);
  motion.prepare(0, 100 * kSecond, 1U);  // a hundred response times
  motion.predict({&h, 1}, {});
  EXPECT_NEAR(h.mean[2], 5.0, 1e-9);
  EXPECT_NEAR(h.p(2, 2), 3.0, 1e-9);
}

struct Square : Formula {
  double evaluate(std::span<const double> states, std::span<const double>, double) override {
    return states[0] * states[0];
  }
};

// x ~ N(2, 0.04): x² has mean 4.04 and variance 4·4·0.04 + 2·0.0016. One state has two sigma points, at which
// the square is regressed exactly but for the last, quartic part of the variance.
TEST(Projector, RegressesAFormulaOverTheSpread) {
  Model model;
  model.states = {{"x", "", 2.0, 0.2, 0.0, {}, AffineForm{{0.0}, {}, 0.0}}};
  ChannelModel c;
  c.reads = std::make_shared<Square>();
  model.channels = {c};
  Random random(7);
  Scene scene(std::make_shared<Model>(model));
  Hypothesis& h = scene.random_hypothesis(random);
  h.mean[0] = 2.0;
  h.p(0, 0) = 0.04;
  Projection out;
  Projector(*scene.model, scene.layout).project(h, 0, 0, Condition::kSound, 0.0, out);
  EXPECT_NEAR(out.mean, 4.04, 1e-12);
  EXPECT_NEAR(out.variance, 0.64, 1e-12);
  EXPECT_NEAR(out.column[0], 0.16, 1e-12);
}

TEST(Projector, FormulaThatIsAffineProjectsAsTheAffineLaw) {
  for (std::uint64_t seed = 1; seed <= 20; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    Random random(seed);
    Scene affine(random_model(random, 3, 2, 2));
    auto model = std::make_shared<Model>(*affine.model);
    for (auto& c : model->channels) c.reads = as_formula(c.reads);
    Scene general(model);
    Hypothesis& a = affine.random_hypothesis(random, {{1, Condition::kOffset}});
    Hypothesis& b = general.pool.append_copy(a);
    for (int j = 0; j < 2; ++j) {
      Projection x;
      Projection y;
      Projector(*affine.model, affine.layout).project(a, j, 0, a.conditions.of(j), 0.0, x);
      Projector(*general.model, general.layout).project(b, j, 0, b.conditions.of(j), 0.0, y);
      EXPECT_NEAR(x.mean, y.mean, 1e-11);
      EXPECT_NEAR(x.variance, y.variance, 1e-11);
      for (int i = 0; i < a.dim; ++i)
        EXPECT_NEAR(x.column[static_cast<std::size_t>(i)], y.column[static_cast<std::size_t>(i)], 1e-11);
    }
  }
}

}  // namespace
}  // namespace steelyard::engine
