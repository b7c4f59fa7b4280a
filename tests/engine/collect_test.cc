// SPDX-License-Identifier: Apache-2.0
// The compute budget: merging equal keys, normalising, keeping the heaviest.
#include "engine/collect.h"

#include <gtest/gtest.h>

#include <map>

#include "engine/cases.h"

namespace steelyard::engine {
namespace {

constexpr std::uint64_t kSeed = 31;

using Key = std::pair<Conditions, Mode>;
Key key_of(const Hypothesis& h) { return {h.conditions, h.mode}; }

// Thirty hypotheses with a dozen keys.
void fill(Scene& scene, Random& random) {
  for (int i = 0; i < 30; ++i) {
    const auto condition = static_cast<Condition>(static_cast<int>(random.uniform() * 4));
    Hypothesis& h = condition == Condition::kSound ? scene.random_hypothesis(random)
                                                   : scene.random_hypothesis(random, {{1, condition}});
    h.mode = static_cast<Mode>(static_cast<int>(random.uniform() * kModes));
  }
}

TEST(Collector, MergesEqualKeysAndOrdersThem) {
  Random random(kSeed);
  Scene scene(random_model(random, 2, 0, 3));
  Collector collector(*scene.model, scene.layout);
  fill(scene, random);
  std::map<Key, double> weight;
  std::map<Key, double> first_moment;
  for (int i = 0; i < scene.pool.size(); ++i) {
    const Hypothesis& h = scene.pool[i];
    weight[key_of(h)] += std::exp(h.log_weight);
    first_moment[key_of(h)] += std::exp(h.log_weight) * h.mean[0];
  }
  collector.merge_equal(scene.pool);
  ASSERT_EQ(static_cast<std::size_t>(scene.pool.size()), weight.size());
  for (int i = 0; i < scene.pool.size(); ++i) {
    const Hypothesis& h = scene.pool[i];
    EXPECT_NEAR(std::exp(h.log_weight), weight.at(key_of(h)), 1e-13);
    EXPECT_NEAR(std::exp(h.log_weight) * h.mean[0], first_moment.at(key_of(h)), 1e-12);
    if (i > 0) {
      EXPECT_TRUE(key_less(scene.pool[i - 1], h));
    }
  }
}

TEST(Collector, NormalisesAndKeepsTheHeaviestInTheirOrder) {
  Random random(kSeed + 1);
  Scene scene(random_model(random, 2, 0, 3));
  Collector collector(*scene.model, scene.layout);
  fill(scene, random);
  double sum = 0.0;
  std::vector<std::pair<double, double>> expected;  // weight, and the mean that tells which one it is
  for (int i = 0; i < scene.pool.size(); ++i) {
    sum += std::exp(scene.pool[i].log_weight);
    expected.emplace_back(scene.pool[i].log_weight, scene.pool[i].mean[0]);
  }
  std::vector<double> weights;
  for (const auto& [w, m] : expected) weights.push_back(w);
  std::sort(weights.rbegin(), weights.rend());
  std::erase_if(expected, [&](const auto& e) { return e.first < weights[6]; });
  const double total = collector.normalise(scene.pool, 7, 1e-20);
  EXPECT_NEAR(total, std::log(sum), 1e-13);
  ASSERT_EQ(scene.pool.size(), 7);
  double kept = 0.0;
  for (int i = 0; i < 7; ++i) {
    kept += std::exp(scene.pool[i].log_weight);
    EXPECT_EQ(scene.pool[i].mean[0], expected[static_cast<std::size_t>(i)].second) << i;
  }
  EXPECT_NEAR(kept, 1.0, 1e-14);
}

TEST(Collector, DropsWhatIsUnderTheFloor) {
  Random random(kSeed + 2);
  Scene scene(random_model(random, 2, 0, 3));
  Collector collector(*scene.model, scene.layout);
  for (const double log_weight : {-3.0, -3.0 - 20.0 * std::log(10.0) - 1.0, -4.0, -400.0})
    scene.random_hypothesis(random).log_weight = log_weight;
  collector.normalise(scene.pool, 10, 1e-20);
  EXPECT_EQ(scene.pool.size(), 2);
}

TEST(Collector, FindsTheHeaviestFirst) {
  Random random(kSeed + 3);
  Scene scene(random_model(random, 2, 0, 3));
  Collector collector(*scene.model, scene.layout);
  fill(scene, random);
  const auto best = collector.heaviest(scene.pool, 5);
  ASSERT_EQ(best.size(), 5U);
  for (std::size_t i = 1; i < best.size(); ++i)
    EXPECT_GE(scene.pool[best[i - 1]].log_weight, scene.pool[best[i]].log_weight);
  int heavier = 0;
  for (int i = 0; i < scene.pool.size(); ++i)
    heavier += scene.pool[i].log_weight > scene.pool[best.back()].log_weight;
  EXPECT_EQ(heavier, 4);
}

// Two of three equal ones go; the heavier one that stands behind them stays.
TEST(Collector, TiesAtTheCutPushNothingHeavierOut) {
  Random random(kSeed + 5);
  Scene scene(random_model(random, 2, 0, 3));
  Collector collector(*scene.model, scene.layout);
  for (const double log_weight : {-2.0, -2.0, -2.0, -1.0, -5.0})
    scene.random_hypothesis(random).log_weight = log_weight;
  const double heaviest = scene.pool[3].mean[0];
  collector.normalise(scene.pool, 2, 1e-20);
  ASSERT_EQ(scene.pool.size(), 2);
  EXPECT_EQ(scene.pool[1].mean[0], heaviest);
  EXPECT_NEAR(scene.pool[1].log_weight - scene.pool[0].log_weight, 1.0, 1e-14);
}

// Equal weights, two channels offset in turn: whichever order they are declared in, the same one stays.
TEST(Collector, TiesGoByNameAndNotByOrder) {
  for (const bool swapped : {false, true}) {
    Random random(kSeed + 4);
    auto model = random_model(random, 2, 0, 2);
    model->channels[0].name = swapped ? "b" : "a";
    model->channels[1].name = swapped ? "a" : "b";
    Scene scene(model);
    Collector collector(*model, scene.layout);
    for (int j = 0; j < 2; ++j)
      scene.random_hypothesis(random, {{j, Condition::kOffset}}).log_weight = -1.0 + (j == 1 ? 1e-15 : 0.0);
    collector.normalise(scene.pool, 1, 1e-20);
    ASSERT_EQ(scene.pool.size(), 1);
    const int sound = scene.pool[0].conditions.of(0) == Condition::kSound ? 0 : 1;
    EXPECT_EQ(model->channels[static_cast<std::size_t>(sound)].name, "a") << "swapped " << swapped;
  }
}

}  // namespace
}  // namespace steelyard::engine
