// SPDX-License-Identifier: Apache-2.0
// One reading's way through the posterior: predict, bear, absorb, merge (engine.md §3–4).
#include "engine/engine.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <stdexcept>

#include "engine/normal.h"
#include "engine/posterior.h"
#include "engine/settle.h"
#include "engine/time.h"

namespace steelyard::engine {
namespace {

constexpr double kFrozenElse = 1.0 - kFrozenRepeats;
// P(a wild or stuck value lies at a range end): a broken wire reads there, so it is no rarity.
constexpr double kAtEnd = 0.05;
constexpr double kWalkMemoryResponses = 5.0;  // half-life of what was learned about an offset's walk
constexpr double kTolerance = 0.1;            // jitter of timestamps allowed for, as a share of the period

}  // namespace

std::span<const double> Posterior::last_of(int channel) const {
  const auto j = static_cast<std::size_t>(channel);
  return std::span(last_values)
      .subspan(static_cast<std::size_t>(layout.first_part[j]),
               static_cast<std::size_t>(layout.part_count[j]));
}

Occasion Posterior::occasion(TimeNs t, int channel, std::span<const double> values, Quality quality) const {
  const auto& c = model->channels[static_cast<std::size_t>(channel)];
  const auto& memory = channels[static_cast<std::size_t>(channel)];
  Occasion o;
  o.channel = channel;
  o.time_s = seconds(t);
  o.values = values;
  o.value = values.front();
  o.first = !memory.fused_any;
  o.last_values = last_of(channel);
  o.last_value = o.last_values.front();
  o.gap_s = o.first ? 0.0 : seconds(t - memory.judged_at);
  o.repeated = !o.first && std::equal(values.begin(), values.end(), o.last_values.begin());
  const double lasting = o.first ? 0.0 : correlation_over(c, seconds(t - memory.fused_at));
  o.fresh = 1.0 - lasting * lasting;
  o.span = o.resolution = 1.0;
  for (int i = 0; i < c.parts(); ++i) {
    const PartModel& part = c.part(i);
    const double value = values[static_cast<std::size_t>(i)];
    o.span *= part.hi - part.lo;
    o.resolution *= effective_resolution(part);
    if (c.parts() > 1 && (value <= part.lo || value >= part.hi)) o.loose |= 1U << static_cast<unsigned>(i);
  }
  o.regular = (1.0 - c.strays) * (quality == Quality::kUncertain ? c.uncertain_ratio : 1.0);
  o.elsewhere = 1.0 / o.span;
  const auto first = static_cast<std::size_t>(layout.first_part[static_cast<std::size_t>(channel)]);
  for (std::size_t k = 0; k < kConditions; ++k) o.walked[k] = walks.own[k][first] * o.gap_s;
  if (c.parts() == 1 && !(c.modulo > 0.0)) censor_by_range(o);
  return o;
}

void Posterior::censor_by_range(Occasion& o) const {
  const auto& c = model->channels[static_cast<std::size_t>(o.channel)];
  if (o.value <= c.lo || (c.cutoff && o.value < *c.cutoff)) {
    o.censoring = Censoring::kBelow;
    o.bound = c.cutoff && o.value < *c.cutoff ? *c.cutoff : c.lo;
  } else if (o.value >= c.hi) {
    o.censoring = Censoring::kAbove;
    o.bound = c.hi;
  }
  if (o.censoring == Censoring::kBelow) o.elsewhere = std::max(kAtEnd, (o.bound - c.lo) / o.span);
  if (o.censoring == Censoring::kAbove) o.elsewhere = kAtEnd;
}

bool Posterior::in_range(int channel, std::span<const double> values) const {
  const auto& c = model->channels[static_cast<std::size_t>(channel)];
  for (int i = 0; i < c.parts(); ++i) {
    const double value = values[static_cast<std::size_t>(i)];
    if (value < c.part(i).lo || value > c.part(i).hi) return false;
  }
  return true;
}

Fate Posterior::read(TimeNs t, int channel, std::span<const double> values, Quality quality, int source) {
  const auto& c = model->channels[static_cast<std::size_t>(channel)];
  auto& memory = channels[static_cast<std::size_t>(channel)];
  if (!started) start(t);
  time = t;
  if (settler) {
    heed_silence(t);
    advance(t);  // settled estimates have a slice at every time of reading, whatever becomes of the reading
    settler->reading();
  }
  if (quality != Quality::kGood && quality != Quality::kUncertain) return Fate::kNotUsable;
  if (memory.seen_any && c.period_s > 0.0 && !c.on_change) {
    const double missed = std::max(0.0, std::round(seconds(t - memory.seen_at) / c.period_s) - 1.0);
    memory.losses.learn(missed, 1.0 - silent(memory, channel, t), seconds(t - memory.seen_at));
  }
  memory.seen_any = true;
  memory.seen_at = t;
  if (!in_range(channel, values)) {
    ++memory.out_of_range;
    return Fate::kOutOfRange;
  }
  if (memory.fused_any && std::equal(values.begin(), values.end(), last_of(channel).begin()) &&
      seconds(t - memory.fused_at) < (1.0 - kTolerance) * c.period_s)
    return Fate::kSameMeasurement;
  heed_silence(t);
  advance(t);
  const Occasion o = occasion(t, channel, values, quality);
  fuse(o);
  remember(t, o, source);
  return Fate::kFused;
}

// An on-change source that says nothing says that its value has not moved by the deadband. That is heeded at
// times of our own: at its period, and after sixteen of those ever less often, so that a long silence costs
// little.
TimeNs Posterior::next_heed(int channel) const {
  constexpr double kStepsPerResponse = 20.0;
  constexpr double kEven = 16.0;
  constexpr TimeNs kNever = std::numeric_limits<TimeNs>::max();
  const auto& c = model->channels[static_cast<std::size_t>(channel)];
  const auto& memory = channels[static_cast<std::size_t>(channel)];
  if (!c.on_change || !memory.fused_any) return kNever;
  const double step_s = c.period_s > 0.0 ? c.period_s : model->response_s / kStepsPerResponse;
  const double quiet_s = seconds(memory.judged_at - memory.fused_at);
  const TimeNs due = memory.judged_at + std::max<TimeNs>(1, nanoseconds(std::max(step_s, quiet_s / kEven)));
  const double heartbeat_s = c.on_change->heartbeat_s;
  const bool overdue = heartbeat_s > 0.0 && seconds(due - memory.fused_at) > heartbeat_s;
  return overdue ? kNever : due;
}

Occasion Posterior::silence_occasion(TimeNs t, int channel) const {
  const auto& c = model->channels[static_cast<std::size_t>(channel)];
  Occasion o = occasion(t, channel, last_of(channel), Quality::kGood);
  o.repeated = false;
  o.fresh = 1.0;
  o.censoring = Censoring::kBetween;
  o.bound = o.last_value - c.on_change->deadband;
  o.upper = o.last_value + c.on_change->deadband;
  o.elsewhere = std::min(1.0, 2.0 * c.on_change->deadband / o.span);
  return o;
}

void Posterior::heed_silence(TimeNs until) {
  for (;;) {
    int soonest = -1;
    TimeNs at = until;
    for (int j = 0; j < layout.channels; ++j) {
      const TimeNs due = next_heed(j);
      if (due >= at) continue;
      at = due;
      soonest = j;
    }
    if (soonest < 0) return;
    advance(at);
    fuse(silence_occasion(at, soonest));
    channels[static_cast<std::size_t>(soonest)].judged_at = at;
  }
}

// Groups that hold the channel: those that the rig names, and the channels that come from the same source.
void Posterior::find_groups(const Occasion& o) {
  const auto& reads = channels[static_cast<std::size_t>(o.channel)];
  groups.clear();
  const auto add = [&](double share, bool freezes_only, const auto& holds) {
    Group g;
    g.share = share;
    g.freezes_only = freezes_only;
    g.gap_s = INFINITY;
    int members = 0;
    for (int j = 0; j < layout.channels; ++j) {
      const auto& memory = channels[static_cast<std::size_t>(j)];
      if (!memory.fused_any || !holds(j, memory)) continue;
      g.member[static_cast<std::size_t>(j)] = true;
      g.gap_s = std::min(g.gap_s, o.time_s - seconds(memory.judged_at));
      ++members;
    }
    if (members > 1 && share > 0.0 && g.gap_s > 0.0) groups.push_back(g);
  };
  for (const CommonCause& cause : model->common) {
    const auto in = [&cause](int j, const ChannelMemory&) {
      return std::find(cause.channels.begin(), cause.channels.end(), j) != cause.channels.end();
    };
    if (in(o.channel, reads)) add(cause.share, false, in);
  }
  if (o.repeated)
    add(model->freeze_share, true,
        [&reads](int, const ChannelMemory& memory) { return memory.source == reads.source; });
}

void Posterior::fuse(const Occasion& o) {
  forget_noise(o);
  bear_children(o);
  absorb_standing(o);
  for (int i = 0; i < children.size(); ++i) now.append_copy(children[i]);
  collector.merge_equal(now);
  log_evidence += collector.normalise(now, model->options.max_hypotheses, model->options.weight_floor);
}

void Posterior::forget_noise(const Occasion& o) {
  if (!model->options.forget || o.first) return;
  const auto& c = model->channels[static_cast<std::size_t>(o.channel)];
  const double keep = std::exp2(-o.gap_s / c.memory_s);
  const double keep_walk = std::exp2(-o.gap_s / (kWalkMemoryResponses * model->response_s));
  for (int i = 0; i < now.size(); ++i) {
    likelihood.forget_noise(now[i], o.channel, keep);
    if (learns_speed(now[i].conditions.of(o.channel)))
      forget(now[i].walk[o.channel], kFirstWalk.a, keep_walk);
  }
}

void Posterior::bear_children(const Occasion& o) {
  children.clear();
  if (model->options.parents == 0) return;
  find_groups(o);
  const auto& parents = collector.heaviest(now, model->options.parents);
  const double log_floor = std::log(model->options.weight_floor);
  for (const int parent : parents) {
    const double stays = births.bear(now[parent], o, walks, log_floor, children, groups, last_values);
    now[parent].log_weight += std::log(std::max(stays, 1e-300));
  }
}

void Posterior::absorb_standing(const Occasion& o) {
  double explained = 0.0;
  double not_frozen = 0.0;
  double freedom = 0.0;
  double log_average = -INFINITY;
  for (int i = 0; i < now.size(); ++i) {
    Hypothesis& h = now[i];
    if (h.conditions.of(o.channel) == Condition::kFrozen) continue;
    const double before = std::exp(h.log_weight);
    const Absorbed a = likelihood.absorb(h, o);
    h.log_weight += a.log_likelihood;
    log_average = log_sum(log_average, h.log_weight);
    absorbed[static_cast<std::size_t>(i)] = a;
    explained += before * a.repeat_probability;
    not_frozen += before;
  }
  const bool evidence = model->options.use_repeats && !o.first && o.censoring == Censoring::kNone;
  const double factor =
      evidence && not_frozen > 0.0
          ? repeat_factor(o.repeated, channels[static_cast<std::size_t>(o.channel)].repeats.mean(),
                          explained / not_frozen)
          : 1.0;
  for (int i = 0; i < now.size(); ++i) {
    Hypothesis& h = now[i];
    if (h.conditions.of(o.channel) == Condition::kFrozen) continue;
    freedom += std::exp(h.log_weight - log_average) * absorbed[static_cast<std::size_t>(i)].influence;
    h.log_weight += std::log(factor);
  }
  settle_frozen(o, not_frozen > 0.0 ? log_average - std::log(not_frozen) : std::log(o.elsewhere));
  auto& memory = channels[static_cast<std::size_t>(o.channel)];
  memory.freedom =
      memory.freedom * std::exp(-seconds(time - memory.freedom_at) / model->response_s) + freedom;
  memory.freedom_at = time;
}

// Frozen hypotheses have no state to update. A censored value is no sign of freezing: it counts as for the
// others.
void Posterior::settle_frozen(const Occasion& o, double log_average) {
  double log_likelihood = frozen_log_likelihood(o.repeated, o.resolution, o.span);
  if (o.censoring == Censoring::kBetween) {
    log_likelihood = std::log(kFrozenRepeats);
  } else if (o.censoring != Censoring::kNone) {
    log_likelihood = o.repeated ? log_average : std::log(kFrozenElse * o.elsewhere);
  }
  for (int i = 0; i < now.size(); ++i) {
    if (now[i].conditions.of(o.channel) != Condition::kFrozen) continue;
    now[i].log_weight += log_likelihood;
    likelihood.reset_colour(now[i], o.channel, o.time_s);
  }
}

double Posterior::probability(int channel, Condition condition) const {
  double sum = 0.0;
  for (int i = 0; i < now.size(); ++i)
    if (now[i].conditions.of(channel) == condition) sum += std::exp(now[i].log_weight);
  return sum;
}

void Posterior::remember(TimeNs t, const Occasion& o, int source) {
  const auto j = static_cast<std::size_t>(o.channel);
  auto& memory = channels[j];
  if (!o.first && o.censoring == Censoring::kNone)
    memory.repeats.learn(o.repeated, 1.0 - std::min(1.0, probability(o.channel, Condition::kFrozen)),
                         o.gap_s);
  memory.fused_any = true;
  memory.fused_at = memory.judged_at = t;
  memory.source = source;
  std::copy(o.values.begin(), o.values.end(), last_values.begin() + layout.first_part[j]);
  const auto& c = model->channels[j];
  bool moves = false;
  for (int i = 0; i < c.parts(); ++i) moves = moves || c.part(i).sd_formula != nullptr;
  if (moves) refresh_walks(now[collector.heaviest(now, 1).front()], o.channel, o.time_s);
}

Engine::Engine(std::shared_ptr<const Model> model) {
  if (!model) throw std::invalid_argument("model: is null");
  if (const std::string why = model->problem(); !why.empty()) throw std::invalid_argument(why);
  impl_ = std::make_unique<Impl>(std::move(model));
}

Engine::Engine(std::shared_ptr<const Model> model, Settling settling) : Engine(std::move(model)) {
  impl_ = std::make_unique<Impl>(impl_->model, true);
  impl_->settler = std::make_unique<Settler>(*impl_, std::move(settling));
}

Engine::Engine(const Engine& other) : impl_(std::make_unique<Impl>(*other.impl_)) {}

Engine& Engine::operator=(const Engine& other) {
  if (this != &other) impl_ = std::make_unique<Impl>(*other.impl_);
  return *this;
}

Engine::Engine(Engine&&) noexcept = default;
Engine& Engine::operator=(Engine&&) noexcept = default;
Engine::~Engine() = default;

void Engine::set_input(TimeNs t, int input, double value, bool good) {
  impl_->set_input(t, input, value, good);
}

Fate Engine::read(TimeNs t, int channel, std::span<const double> values, Quality quality, int source) {
  return impl_->read(t, channel, values, quality, source);
}

void Engine::settle_rest() {
  if (impl_->settler && impl_->started) impl_->settler->finish(*impl_);
}

std::int64_t Engine::settled_early() const { return impl_->settler ? impl_->settler->early() : 0; }

TimeNs Engine::time() const { return impl_->time; }
bool Engine::started() const { return impl_->started; }
double Engine::log_evidence() const { return impl_->log_evidence; }
const Model& Engine::model() const { return *impl_->model; }

}  // namespace steelyard::engine
