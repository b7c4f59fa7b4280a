// SPDX-License-Identifier: Apache-2.0
// New conditions: their probabilities, and what an offset starts from.
#include "engine/births.h"

#include <gtest/gtest.h>

#include <map>

#include "engine/cases.h"
#include "engine/normal.h"

namespace steelyard::engine {
namespace {

using Eigen::MatrixXd;
using Eigen::VectorXd;

constexpr int kChannel = 1;  // has a bias
constexpr double kGapS = 0.7;
constexpr double kFloor = -1e9;

struct Nursery {
  Nursery(std::uint64_t seed, const std::vector<std::pair<int, Condition>>& unsound, bool repeated)
      : random(seed) {
    auto model = random_model(random, 3, 1, 3);
    model->options.learn_precision = false;
    for (auto& c : model->channels) {
      c.fails_every_s = 50.0;
      c.recovers_in_s = 20.0;
      c.changes_in_s = 5.0;
      c.offset_size = 3.0;
      c.lo = -40.0;
      c.hi = 60.0;
      c.resolution = 0.01;
    }
    scene = std::make_unique<Scene>(model);
    likelihood = std::make_unique<Likelihood>(*model, scene->layout);
    births = std::make_unique<Births>(*model, scene->layout, *likelihood);
    children = std::make_unique<Pool>(scene->layout, Births::most_children(0));
    parent = &scene->random_hypothesis(random, unsound);
    occasion = plain_occasion(*model, kChannel, random.between(-5.0, 5.0));
    occasion.gap_s = kGapS;
    if (repeated) {
      occasion.repeated = true;
      occasion.last_value = occasion.value;
    }
    for (std::size_t c = 0; c < kConditions; ++c) density.own[c].fill(0.1 * static_cast<double>(c));
  }
  void bear() { stays = births->bear(*parent, occasion, density, kFloor, *children); }

  Random random;
  std::unique_ptr<Scene> scene;
  std::unique_ptr<Likelihood> likelihood;
  std::unique_ptr<Births> births;
  std::unique_ptr<Pool> children;
  Walks density{};
  Hypothesis* parent = nullptr;
  Occasion occasion;
  double stays = 0.0;
};

// The parent's hypothesis with the channel made sound, dense.
struct SoundView {
  VectorXd mean;
  MatrixXd cov;
  VectorXd row;
  double e = 0.0, s = 0.0, r = 0.0;
};

SoundView sound_view(Nursery& n) {
  Pool copy(n.scene->layout, 1);
  Hypothesis& h = copy.append_copy(*n.parent);
  if (has_own(h.conditions.of(kChannel))) drop_own(h, kChannel);
  h.conditions.set(kChannel, Condition::kSound);
  const Row row = row_of(*n.scene, h, kChannel);
  const auto& c = n.scene->model->channels[kChannel];
  SoundView v{mean_of(h), covariance_of(h), row.on_z, 0.0, 0.0, 0.0};
  v.e = n.occasion.value - row.on_z.dot(v.mean) - row.constant;
  v.s = row.on_z.dot(v.cov * row.on_z);
  v.r = c.sd * c.sd + c.resolution * c.resolution / 12.0;
  return v;
}

const Hypothesis& child_in(const Nursery& n, Condition condition) {
  for (int i = 0; i < n.children->size(); ++i)
    if ((*n.children)[i].conditions.of(kChannel) == condition) return (*n.children)[i];
  throw std::runtime_error("no such child");
}

// An offset o ~ N(0, B²) independent of z, and the Kalman update with y = h·z + o + v: for B → ∞ the reading
// is used up by the offset. At B = 1e4 the limit and the digits lost to B² both cost about 1e-8.
TEST(OffsetBirth, IsTheBroadPriorLimitOfTheExactUpdate) {
  constexpr double kBroad = 1e4;
  for (std::uint64_t seed = 1; seed <= 40; ++seed) {
    for (const auto& before : {std::vector<std::pair<int, Condition>>{{2, Condition::kOffset}},
                               {{kChannel, Condition::kStuck}, {2, Condition::kOffset}},
                               {{kChannel, Condition::kFrozen}}}) {
      SCOPED_TRACE("seed " + std::to_string(seed));
      Nursery n(seed, before, false);
      const SoundView v = sound_view(n);
      n.bear();
      const Hypothesis& child = child_in(n, Condition::kOffset);
      const auto d = v.mean.size();
      MatrixXd p = MatrixXd::Zero(d + 1, d + 1);
      p.topLeftCorner(d, d) = v.cov;
      p(d, d) = kBroad * kBroad;
      VectorXd row(d + 1);
      row << v.row, 1.0;
      const VectorXd gain = p * row / (row.dot(p * row) + v.r);
      VectorXd mean = VectorXd::Zero(d + 1);
      mean.head(d) = v.mean;
      mean += gain * v.e;
      p -= gain * (p * row).transpose();
      // The child's own numbers stand in the order of channels: channel 1's comes before channel 2's.
      const int at = child.own_at[kChannel];
      ASSERT_EQ(child.dim, d + 1);
      const auto place = [&](int i) { return i == at ? static_cast<int>(d) : i > at ? i - 1 : i; };
      for (int i = 0; i <= d; ++i) {
        EXPECT_NEAR(child.mean[i], mean(place(i)), 1e-5) << i;
        for (int k = 0; k <= d; ++k)
          EXPECT_NEAR(child.p(i, k), p(place(i), place(k)), 1e-5) << i << ", " << k;
      }
    }
  }
}

// The factor that the reading's likelihood has in a child; what is left of its weight is the switch.
double log_likelihood_in(Nursery& n, Condition condition) {
  const auto& c = n.scene->model->channels[kChannel];
  const SoundView v = sound_view(n);
  const Condition from = n.parent->conditions.of(kChannel);
  if (condition == Condition::kStuck) return -std::log(c.hi - c.lo);
  if (condition == Condition::kFrozen) return std::log(0.98 / c.resolution);
  if (condition == Condition::kSound) return log_normal(v.e, v.s + v.r);
  if (!is_walk(from)) return log_normal(v.e, v.s + v.r + c.offset_size * c.offset_size);
  Pool copy(n.scene->layout, 1);
  Hypothesis& h = copy.append_copy(*n.parent);
  h.conditions.set(kChannel, condition);
  const int at = h.own_at[kChannel];
  if (condition > from) h.p(at, at) += n.density.own[static_cast<std::size_t>(condition)][kChannel] * kGapS;
  const Row row = row_of(*n.scene, h, kChannel);
  return log_normal(n.occasion.value - row.on_z.dot(mean_of(h)) - row.constant,
                    row.on_z.dot(covariance_of(h) * row.on_z) + v.r);
}

void expect_switches(Nursery& n, const std::map<Condition, double>& rates) {
  n.bear();
  double total = 0.0;
  for (const auto& [condition, rate] : rates) total += rate;
  EXPECT_NEAR(n.stays, std::exp(-total * kGapS), 1e-14);
  ASSERT_EQ(static_cast<std::size_t>(n.children->size()), rates.size());
  double sum = n.stays;
  for (const auto& [condition, rate] : rates) {
    const Hypothesis& child = child_in(n, condition);
    const double p = std::exp(child.log_weight - n.parent->log_weight - log_likelihood_in(n, condition));
    EXPECT_NEAR(p, (1.0 - n.stays) * rate / total, 1e-11) << static_cast<int>(condition);
    sum += p;
  }
  EXPECT_NEAR(sum, 1.0, 1e-10);
}

using C = Condition;
constexpr double kFails = 1.0 / 150.0;
constexpr double kRecovers = 1.0 / 20.0;
constexpr double kChanges = 1.0 / 5.0;

TEST(Switches, FromSoundAreTheDeclaredRates) {
  Nursery n(1, {}, false);
  expect_switches(
      n, {{C::kCreeping, kFails}, {C::kOffset, kFails}, {C::kWandering, kFails}, {C::kStuck, kFails}});
}

TEST(Switches, ToFrozenNeedARepeat) {
  Nursery n(2, {}, true);
  expect_switches(n, {{C::kCreeping, kFails},
                      {C::kOffset, kFails},
                      {C::kWandering, kFails},
                      {C::kStuck, kFails},
                      {C::kFrozen, kFails}});
}

TEST(Switches, FromAWalkAreTheDeclaredRates) {
  Nursery n(3, {{kChannel, C::kOffset}}, false);
  expect_switches(
      n,
      {{C::kSound, kRecovers}, {C::kCreeping, kChanges}, {C::kWandering, kChanges}, {C::kStuck, kChanges}});
}

TEST(Switches, FromStuckReachWalksAtHalfTheRateAndANewLevel) {
  Nursery n(4, {{kChannel, C::kStuck}}, false);
  expect_switches(n, {{C::kSound, kRecovers},
                      {C::kCreeping, 0.5 * kChanges},
                      {C::kOffset, 0.5 * kChanges},
                      {C::kWandering, 0.5 * kChanges},
                      {C::kStuck, kChanges}});
}

TEST(Switches, OnlyToWhatIsAllowed) {
  Nursery n(5, {}, true);
  n.scene->model->options.conditions = {true, false, true, false, false, false};
  expect_switches(n, {{C::kOffset, kFails}});
}

TEST(Switches, AFirstReadingHasFewFaults) {
  Nursery n(6, {}, false);
  n.occasion.first = true;
  n.bear();
  EXPECT_NEAR(n.stays, std::exp(-3.0 * kFails * n.scene->model->response_s * 1e-3 / 50.0), 1e-14);
}

TEST(Switches, NoneAtAFirstReadingWhereChannelsAreBornSound) {
  Nursery n(6, {}, false);
  n.scene->model->options.born_faulty = false;
  n.occasion.first = true;
  n.bear();
  EXPECT_EQ(n.stays, 1.0);
  EXPECT_EQ(n.children->size(), 0);
}

TEST(Switches, BirthsOfAFaultAreBoundedToOneResponse) {
  Nursery n(7, {}, false);
  n.occasion.gap_s = 1e6;
  n.bear();
  EXPECT_NEAR(n.stays, std::exp(-4.0 * kFails * n.scene->model->response_s), 1e-14);
}

TEST(Switches, StuckStartsAtTheReadingAndFromTheDatasheet) {
  Nursery n(8, {}, false);
  n.bear();
  const Hypothesis& child = child_in(n, C::kStuck);
  const int at = child.own_at[kChannel];
  EXPECT_EQ(child.mean[at], n.occasion.value);
  for (int i = 0; i < child.dim; ++i)
    if (i != at) {
      EXPECT_EQ(child.p(at, i), 0.0);
    }
  EXPECT_EQ(child.noise[kChannel].a, 0.5 * n.scene->model->channels[kChannel].prior_readings);
  EXPECT_EQ(child.noise[kChannel].a, child.noise[kChannel].b);
  EXPECT_EQ(child_in(n, C::kOffset).noise[kChannel].a, n.parent->noise[kChannel].a);
}

}  // namespace
}  // namespace steelyard::engine
