// SPDX-License-Identifier: Apache-2.0
// Births (engine.md §4 step 6). An offset starts from the reading itself, which thereby is used up; the prior
// density of such an offset is the Occam factor that keeps false alarms away.
#include "engine/births.h"

#include <algorithm>
#include <cmath>

#include "engine/normal.h"
#include "engine/repeats.h"

namespace steelyard::engine {

// Competing risks per second of time between two readings.
double Births::rate(Condition from, Condition to, const ChannelModel& c) const {
  if (from == to && from != Condition::kStuck) return 0.0;  // stuck → stuck: a new level
  if (from == Condition::kSound) return 1.0 / (3.0 * c.fails_every_s);
  if (to == Condition::kSound) return 1.0 / c.recovers_in_s;
  const bool was_dead = from == Condition::kStuck || from == Condition::kFrozen;
  return (was_dead && is_walk(to) ? 0.5 : 1.0) / c.changes_in_s;
}

int Births::switches(const Hypothesis& parent, const Occasion& o, std::array<Switch, kConditions>& out,
                     double& stays) const {
  const auto& c = model_.channels[static_cast<std::size_t>(o.channel)];
  const Condition from = parent.conditions.of(o.channel);
  // A long gap before a reading says little about when a fault struck: births are bounded to one response.
  const double gap_s = from == Condition::kSound ? std::min(o.gap_s, model_.response_s) : o.gap_s;
  std::array<double, kConditions> rates{};
  double total = 0.0;
  for (int k = 0; k < kConditions; ++k) {
    const auto to = static_cast<Condition>(k);
    const bool possible = model_.options.conditions[static_cast<std::size_t>(k)] &&
                          (to != Condition::kFrozen || (o.repeated && o.censoring == Censoring::kNone));
    if (possible) rates[static_cast<std::size_t>(k)] = rate(from, to, c);
    total += rates[static_cast<std::size_t>(k)];
  }
  stays = std::exp(-total * gap_s);
  if (!(total * gap_s > 0.0)) return 0;
  const double log_leaves = std::log(-std::expm1(-total * gap_s) / total);
  int count = 0;
  for (int k = 0; k < kConditions; ++k) {
    if (rates[static_cast<std::size_t>(k)] <= 0.0) continue;
    out[static_cast<std::size_t>(count++)] = {
        static_cast<Condition>(k),
        parent.log_weight + log_leaves + std::log(rates[static_cast<std::size_t>(k)])};
  }
  return count;
}

double Births::bear(const Hypothesis& parent, const Occasion& o, const Walks& walks, double log_floor,
                    Pool& children) {
  double stays = 1.0;
  if (o.first) return stays;
  std::array<Switch, kConditions> to{};
  const int count = switches(parent, o, to, stays);
  const Condition from = parent.conditions.of(o.channel);
  for (int i = 0; i < count; ++i) {
    const Switch& s = to[static_cast<std::size_t>(i)];
    if (s.log_weight < log_floor) continue;
    if (s.to == Condition::kSound) {
      bear_sound(parent, o, s, children);
    } else if (s.to == Condition::kStuck) {
      bear_stuck(parent, o, s, children);
    } else if (s.to == Condition::kFrozen) {
      bear_frozen(parent, o, s, children);
    } else if (is_walk(from)) {
      bear_walk(parent, o, s, walks, children);
    } else {
      bear_offset(parent, o, s, walks, children);
    }
  }
  return stays;
}

Hypothesis& Births::child_of(const Hypothesis& parent, const Occasion& o, const Switch& to,
                             Pool& children) const {
  Hypothesis& child = children.append_copy(parent);
  child.log_weight = to.log_weight;
  child.conditions.set(o.channel, to.to);
  return child;
}

void Births::start_noise(Hypothesis& h, int channel) const {
  const double a0 = 0.5 * model_.channels[static_cast<std::size_t>(channel)].prior_readings;
  h.noise[channel] = {a0, a0};
}

// sound, stuck or frozen → a walk: o = e exactly as uncertain as the reading that it is started from.
void Births::bear_offset(const Hypothesis& parent, const Occasion& o, const Switch& to, const Walks& walks,
                         Pool& children) {
  const auto& c = model_.channels[static_cast<std::size_t>(o.channel)];
  Hypothesis& child = child_of(parent, o, to, children);
  if (has_own(parent.conditions.of(o.channel))) drop_own(child, o.channel);
  const double prior_variance = c.offset_size * c.offset_size;
  if (o.censoring != Censoring::kNone) {
    // A censored reading fixes no offset: it starts from its prior, and the reading then bounds it.
    expected_.column.fill(0.0);
    add_own(child, o.channel, 0.0, prior_variance, expected_.column.data());
    if (has_rate(to.to)) add_rate(child, o.channel, walks.first_rate[static_cast<std::size_t>(o.channel)]);
    child.log_weight += likelihood_.absorb(child, o).log_likelihood;
    return;
  }
  likelihood_.projector().project(child, o.channel, Condition::kSound, o.time_s, expected_);
  if (!expected_.known()) return children.shrink(children.size() - 1);
  const double r = likelihood_.noise_variance(child.noise[o.channel], expected_.spec_variance);
  const double e = likelihood_.residual(o, expected_.mean);
  const double variance = expected_.variance + r;
  for (int i = 0; i < child.dim; ++i) expected_.column[static_cast<std::size_t>(i)] *= -1.0;
  add_own(child, o.channel, e, variance, expected_.column.data());
  if (has_rate(to.to)) add_rate(child, o.channel, walks.first_rate[static_cast<std::size_t>(o.channel)]);
  child.log_weight += log_normal(e, variance + prior_variance);
}

// Between walks the state is kept; a faster one first makes one step of its own.
void Births::bear_walk(const Hypothesis& parent, const Occasion& o, const Switch& to, const Walks& walks,
                       Pool& children) {
  const auto j = static_cast<std::size_t>(o.channel);
  Hypothesis& child = child_of(parent, o, to, children);
  const auto from = static_cast<std::size_t>(parent.conditions.of(o.channel));
  const auto next = static_cast<std::size_t>(to.to);
  if (has_rate(parent.conditions.of(o.channel))) drop_rate(child, o.channel);
  if (next > from) child.p(child.own_at[j], child.own_at[j]) += walks.own[next][j] * o.gap_s;
  if (has_rate(to.to)) add_rate(child, o.channel, walks.first_rate[j]);
  child.log_weight += likelihood_.absorb(child, o).log_likelihood;
}

void Births::bear_stuck(const Hypothesis& parent, const Occasion& o, const Switch& to, Pool& children) const {
  Hypothesis& child = child_of(parent, o, to, children);
  if (has_own(parent.conditions.of(o.channel))) drop_own(child, o.channel);
  const double variance = likelihood_.projector().spec_variance(child, o.channel, o.time_s);
  std::array<double, kMaxDim> none{};
  add_own(child, o.channel, o.value, variance, none.data());
  start_noise(child, o.channel);
  child.log_weight += std::log(o.elsewhere);
}

void Births::bear_frozen(const Hypothesis& parent, const Occasion& o, const Switch& to,
                         Pool& children) const {
  Hypothesis& child = child_of(parent, o, to, children);
  if (has_own(parent.conditions.of(o.channel))) drop_own(child, o.channel);
  start_noise(child, o.channel);
  child.log_weight += std::log(kFrozenRepeats / o.resolution);
}

void Births::bear_sound(const Hypothesis& parent, const Occasion& o, const Switch& to, Pool& children) {
  Hypothesis& child = child_of(parent, o, to, children);
  if (has_own(parent.conditions.of(o.channel))) drop_own(child, o.channel);
  start_noise(child, o.channel);
  child.log_weight += likelihood_.absorb(child, o).log_likelihood;
}

}  // namespace steelyard::engine
