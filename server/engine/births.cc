// SPDX-License-Identifier: Apache-2.0
// Births (engine.md §4 step 6). An offset starts from the reading itself, which thereby is used up; the prior
// density of such an offset is the Occam factor that keeps false alarms away.
#include "engine/births.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "engine/repeats.h"

namespace steelyard::engine {

// Competing risks per second of time between two readings.
double Births::rate(Condition from, Condition to, const ChannelModel& c) const {
  if (from == to && from != Condition::kStuck) return 0.0;  // stuck → stuck: a new level
  if (from == Condition::kSound) return 1.0 / (3.0 * c.fails_every_s);
  // A value that moves again is the end of a freeze, and what was frozen is then most often well: were only
  // the walks quick to follow, a channel that froze with others of its source would come out of it as
  // unsound.
  if (to == Condition::kSound) return 1.0 / (from == Condition::kFrozen ? c.changes_in_s : c.recovers_in_s);
  const bool was_dead = from == Condition::kStuck || from == Condition::kFrozen;
  return (was_dead && is_walk(to) ? 0.5 : 1.0) / c.changes_in_s;
}

bool Births::possible(Condition to, const Occasion& o) const {
  if (!model_.options.conditions[static_cast<std::size_t>(to)]) return false;
  // A first reading cannot show that it does not move with the machine.
  if (to == Condition::kStuck) return !o.first;
  if (to != Condition::kFrozen) return true;
  return o.censoring == Censoring::kBetween || (o.repeated && o.censoring == Censoring::kNone);
}

// A long gap before a reading says little about when a fault struck: births are bounded to one response. What
// is put to use has been commissioned, so that few channels are faulty at their first reading; were many,
// channels that see a trend which the law lacks would all be taken for faulty from the start.
int Births::switches(const Hypothesis& parent, const Occasion& o, double alone_share,
                     std::array<Switch, kConditions>& out, double& stays) const {
  const auto& c = model_.channels[static_cast<std::size_t>(o.channel)];
  const Condition from = parent.conditions.of(o.channel);
  constexpr double kReadingsPerResponse = 50.0;  // where no period is declared
  constexpr double kCommissioned = 1e-3;         // of the faults of a usual gap
  const double usual_s = c.period_s > 0.0 ? c.period_s : model_.response_s / kReadingsPerResponse;
  const double since_s = o.first ? kCommissioned * usual_s : o.gap_s;
  const double gap_s = from == Condition::kSound ? std::min(since_s, model_.response_s) : since_s;
  std::array<double, kConditions> rates{};
  double total = 0.0;
  for (int k = 0; k < kConditions; ++k) {
    const auto to = static_cast<Condition>(k);
    if (possible(to, o)) rates[static_cast<std::size_t>(k)] = rate(from, to, c);
    if (from == Condition::kSound) rates[static_cast<std::size_t>(k)] *= alone_share;
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
                    Pool& children, std::span<const Group> groups, std::span<const double> last_values) {
  double stays = 1.0;
  if (o.first && !model_.options.born_faulty) return stays;
  double together = 0.0;
  for (const Group& g : groups)
    if (!g.freezes_only) together += g.share;
  std::array<Switch, kConditions> to{};
  const int count = switches(parent, o, std::max(0.0, 1.0 - together), to, stays);
  for (int i = 0; i < count; ++i)
    if (to[static_cast<std::size_t>(i)].log_weight >= log_floor)
      bear(parent, o, to[static_cast<std::size_t>(i)], walks, children);
  if (parent.conditions.of(o.channel) == Condition::kSound && !o.first)
    for (const Group& g : groups) bear_together(parent, o, g, walks, last_values, log_floor, children);
  return stays;
}

// One cause strikes every member that is still sound. The probability that it struck is taken from the time
// since any member read, so that it counts once; beside it, that nothing happened stays all but certain.
void Births::bear_together(const Hypothesis& parent, const Occasion& o, const Group& group,
                           const Walks& walks, std::span<const double> last_values, double log_floor,
                           Pool& children) {
  const double gap_s = std::min(group.gap_s, model_.response_s);
  for (int k = 1; k < kConditions; ++k) {
    const auto to = static_cast<Condition>(k);
    if (!possible(to, o) || (group.freezes_only && to != Condition::kFrozen)) continue;
    const double each =
        group.share * rate(Condition::kSound, to, model_.channels[static_cast<std::size_t>(o.channel)]);
    const Switch s{to, parent.log_weight + std::log(-std::expm1(-each * gap_s))};
    if (!(s.log_weight >= log_floor) || !bear(parent, o, s, walks, children)) continue;
    Hypothesis& child = children[children.size() - 1];
    for (int j = 0; j < layout_.channels; ++j)
      if (j != o.channel && group.member[static_cast<std::size_t>(j)] &&
          child.conditions.of(j) == Condition::kSound)
        strike(child, j, to, o.time_s, walks, last_values);
  }
}

// A channel becomes unsound without a reading of its own: its next one will show what is as yet unknown.
void Births::strike(Hypothesis& h, int channel, Condition condition, double time_s, const Walks& walks,
                    std::span<const double> last_values) {
  const auto j = static_cast<std::size_t>(channel);
  const auto& c = model_.channels[j];
  h.conditions.set(channel, condition);
  h.since[channel] = time_s;
  h.walk[channel] = kFirstWalk;
  if (!is_walk(condition)) {
    likelihood_.start_noise(h, channel);
    likelihood_.reset_colour(h, channel, time_s);
  }
  if (!has_own(condition)) return;
  const int at = add_own(h, channel, c.parts());
  for (int i = 0; i < c.parts(); ++i) {
    const PartModel& part = c.part(i);
    const bool stuck = condition == Condition::kStuck;
    const double size = stuck ? (part.hi - part.lo) / std::sqrt(12.0) : part.offset_size;
    h.mean[at + i] = stuck ? last_values[static_cast<std::size_t>(layout_.first_part[j] + i)] : 0.0;
    h.p(at + i, at + i) = size * size;
  }
  if (has_rate(condition)) start_rates(h, channel, walks);
}

void Births::start_rates(Hypothesis& h, int channel, const Walks& walks) const {
  const auto j = static_cast<std::size_t>(channel);
  add_rate(h, channel,
           std::span(walks.first_rate)
               .subspan(static_cast<std::size_t>(layout_.first_part[j]),
                        static_cast<std::size_t>(layout_.part_count[j])));
}

// What looked like an offset that walks fast may have been noise all the time: half of the recoveries start
// with noise of the offset's size. Without them the set is trapped: a recovered channel with its datasheet's
// noise cannot explain the next reading, and the noise does not grow in a hypothesis whose walk explains all.
void Births::bear_noisy(const Hypothesis& parent, const Occasion& o, const Switch& to, Pool& children) {
  const auto j = static_cast<std::size_t>(o.channel);
  std::array<double, kMaxParts> variance;
  for (int i = 0; i < layout_.part_count[j]; ++i) {
    const int at = parent.own_at[j] + i;
    variance[static_cast<std::size_t>(i)] = parent.mean[at] * parent.mean[at] + parent.p(at, at);
  }
  Hypothesis& child = children.append_copy(parent);
  child.log_weight = to.log_weight;
  child.conditions.set(o.channel, Condition::kSound);
  drop_own(child, o.channel);
  likelihood_.start_noise(child, o.channel, variance, o.time_s);
  child.log_weight += likelihood_.absorb(child, o).log_likelihood;
}

bool Births::bear(const Hypothesis& parent, const Occasion& o, const Switch& to, const Walks& walks,
                  Pool& children) {
  if (to.to == Condition::kSound && learns_speed(parent.conditions.of(o.channel)) &&
      model_.options.learn_precision) {
    bear_noisy(parent, o, {to.to, to.log_weight - std::numbers::ln2}, children);
  }
  Hypothesis& child = children.append_copy(parent);
  child.log_weight = to.log_weight;
  const bool was_sound = parent.conditions.of(o.channel) == Condition::kSound;
  if (was_sound) child.since[o.channel] = o.time_s;
  if (become(child, o, to.to, walks)) return true;
  children.shrink(children.size() - 1);
  return false;
}

// Offsets and levels start from the reading, which is thereby used; the walks keep the parent's noise, all
// other conditions begin with the datasheet's.
bool Births::become(Hypothesis& child, const Occasion& o, Condition to, const Walks& walks) {
  const Condition from = child.conditions.of(o.channel);
  if (is_walk(from) && is_walk(to)) {
    become_walk(child, o, to, walks);
    return true;
  }
  child.conditions.set(o.channel, to);
  if (has_own(from)) drop_own(child, o.channel);
  if (is_walk(to)) return become_offset(child, o, to, walks);
  likelihood_.start_noise(child, o.channel);
  if (to == Condition::kSound) {
    child.log_weight += likelihood_.absorb(child, o).log_likelihood;
  } else if (to == Condition::kStuck) {
    likelihood_.begin_level(child, o);
    child.log_weight += std::log(o.elsewhere);
  } else {
    likelihood_.reset_colour(child, o.channel, o.time_s);
    child.log_weight += o.censoring == Censoring::kBetween
                            ? std::log(kFrozenRepeats)
                            : frozen_log_likelihood(true, o.resolution, o.span);
  }
  return true;
}

bool Births::become_offset(Hypothesis& child, const Occasion& o, Condition to, const Walks& walks) {
  child.walk[o.channel] = kFirstWalk;
  const double log_likelihood = likelihood_.begin_offset(child, o);
  if (std::isnan(log_likelihood)) return false;
  if (has_rate(to)) start_rates(child, o.channel, walks);
  child.log_weight += log_likelihood;
  return true;
}

// Between walks the state is kept; a faster one first makes one step of its own.
void Births::become_walk(Hypothesis& child, const Occasion& o, Condition to, const Walks& walks) {
  const auto j = static_cast<std::size_t>(o.channel);
  const Condition from = child.conditions.of(o.channel);
  const int parts = layout_.part_count[j];
  child.conditions.set(o.channel, to);
  child.walk[o.channel] = kFirstWalk;
  if (has_rate(from)) drop_rate(child, o.channel, parts);
  const int at = child.own_at[j];
  for (int i = 0; i < parts && to > from; ++i)
    child.p(at + i, at + i) +=
        walks.own[static_cast<std::size_t>(to)][static_cast<std::size_t>(layout_.first_part[j] + i)] *
        o.gap_s;
  if (has_rate(to)) start_rates(child, o.channel, walks);
  child.log_weight += likelihood_.absorb(child, o).log_likelihood;
}

}  // namespace steelyard::engine
