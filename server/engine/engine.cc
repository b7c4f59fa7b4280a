// SPDX-License-Identifier: Apache-2.0
// One reading's way through the posterior: predict, bear, absorb, merge (engine.md §3–4).
#include "engine/engine.h"

#include <algorithm>
#include <cmath>
#include <stdexcept>

#include "engine/normal.h"
#include "engine/posterior.h"
#include "engine/time.h"

namespace steelyard::engine {
namespace {

constexpr double kFrozenElse = 1.0 - kFrozenRepeats;
// P(a wild or stuck value lies at a range end): a broken wire reads there, so it is no rarity.
constexpr double kAtEnd = 0.05;
constexpr double kTolerance = 0.1;  // jitter of timestamps allowed for, as a share of the period

}  // namespace

Occasion Posterior::occasion(TimeNs t, int channel, double value, Quality quality) const {
  const auto& c = model->channels[static_cast<std::size_t>(channel)];
  const auto& memory = channels[static_cast<std::size_t>(channel)];
  Occasion o;
  o.channel = channel;
  o.time_s = seconds(t);
  o.value = value;
  o.first = !memory.fused_any;
  o.gap_s = o.first ? 0.0 : seconds(t - memory.fused_at);
  o.repeated = !o.first && value == memory.last_value;
  o.last_value = memory.last_value;
  o.span = c.hi - c.lo;
  o.resolution = effective_resolution(c);
  o.regular = (1.0 - c.strays) * (quality == Quality::kUncertain ? c.uncertain_ratio : 1.0);
  o.elsewhere = 1.0 / o.span;
  if (c.modulo > 0.0) return o;
  if (value <= c.lo || (c.cutoff && value < *c.cutoff)) {
    o.censoring = Censoring::kBelow;
    o.bound = c.cutoff && value < *c.cutoff ? *c.cutoff : c.lo;
  } else if (value >= c.hi) {
    o.censoring = Censoring::kAbove;
    o.bound = c.hi;
  }
  if (o.censoring == Censoring::kBelow) o.elsewhere = std::max(kAtEnd, (o.bound - c.lo) / o.span);
  if (o.censoring == Censoring::kAbove) o.elsewhere = kAtEnd;
  return o;
}

Fate Posterior::read(TimeNs t, int channel, double value, Quality quality) {
  const auto& c = model->channels[static_cast<std::size_t>(channel)];
  auto& memory = channels[static_cast<std::size_t>(channel)];
  if (!started) start(t);
  time = t;
  if (quality != Quality::kGood && quality != Quality::kUncertain) return Fate::kNotUsable;
  memory.seen_any = true;
  memory.seen_at = t;
  if (value < c.lo || value > c.hi) {
    ++memory.out_of_range;
    return Fate::kOutOfRange;
  }
  if (memory.fused_any && value == memory.last_value &&
      seconds(t - memory.fused_at) < (1.0 - kTolerance) * c.period_s)
    return Fate::kSameMeasurement;
  advance(t);
  const Occasion o = occasion(t, channel, value, quality);
  fuse(o);
  remember(t, o);
  return Fate::kFused;
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
  for (int i = 0; i < now.size(); ++i) forget(now[i].noise[o.channel], 0.5 * c.prior_readings, keep);
}

void Posterior::bear_children(const Occasion& o) {
  children.clear();
  if (model->options.parents == 0) return;
  const auto& parents = collector.heaviest(now, model->options.parents);
  const double log_floor = std::log(model->options.weight_floor);
  for (const int parent : parents) {
    const double stays = births.bear(now[parent], o, walks, log_floor, children);
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
  double log_likelihood =
      o.repeated ? std::log(kFrozenRepeats / o.resolution) : std::log(kFrozenElse / o.span);
  if (o.censoring != Censoring::kNone)
    log_likelihood = o.repeated ? log_average : std::log(kFrozenElse * o.elsewhere);
  for (int i = 0; i < now.size(); ++i)
    if (now[i].conditions.of(o.channel) == Condition::kFrozen) now[i].log_weight += log_likelihood;
}

double Posterior::probability(int channel, Condition condition) const {
  double sum = 0.0;
  for (int i = 0; i < now.size(); ++i)
    if (now[i].conditions.of(channel) == condition) sum += std::exp(now[i].log_weight);
  return sum;
}

void Posterior::remember(TimeNs t, const Occasion& o) {
  auto& memory = channels[static_cast<std::size_t>(o.channel)];
  if (!o.first && o.censoring == Censoring::kNone)
    memory.repeats.learn(o.repeated, 1.0 - std::min(1.0, probability(o.channel, Condition::kFrozen)),
                         o.gap_s);
  memory.fused_any = true;
  memory.fused_at = t;
  memory.last_value = o.value;
  if (!model->channels[static_cast<std::size_t>(o.channel)].sd_formula) return;
  const int heaviest = collector.heaviest(now, 1).front();
  memory.spec_sd = std::sqrt(likelihood.projector().spec_variance(now[heaviest], o.channel, o.time_s));
  refresh_walks(o.channel);
}

Engine::Engine(std::shared_ptr<const Model> model) {
  if (!model) throw std::invalid_argument("model: is null");
  if (const std::string why = model->problem(); !why.empty()) throw std::invalid_argument(why);
  impl_ = std::make_unique<Impl>(std::move(model));
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

Fate Engine::read(TimeNs t, int channel, std::span<const double> values, Quality quality, int /*source*/) {
  return impl_->read(t, channel, values.front(), quality);
}

TimeNs Engine::time() const { return impl_->time; }
bool Engine::started() const { return impl_->started; }
double Engine::log_evidence() const { return impl_->log_evidence; }
const Model& Engine::model() const { return *impl_->model; }

}  // namespace steelyard::engine
