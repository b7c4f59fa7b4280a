// SPDX-License-Identifier: Apache-2.0
// One reading's way through the posterior: predict, bear, absorb, merge (engine.md §3–4).
#include "engine/engine.h"

#include <algorithm>
#include <cmath>
#include <stdexcept>

#include "engine/normal.h"
#include "engine/posterior.h"

namespace steelyard::engine {
namespace {

constexpr double kFrozenRepeats = 0.98;
constexpr double kFrozenElse = 0.02;
// Walk speeds of creeping, offset, wandering and stuck, in datasheet sd per √R (engine.md §6).
constexpr std::array<double, kConditions> kWalk{0.0, 0.1, 2.0, 30.0, 0.05, 0.0};
// P(a wild or stuck value lies at a range end): a broken wire reads there, so it is no rarity.
constexpr double kAtEnd = 0.05;
constexpr double kTolerance = 0.1;  // jitter of timestamps allowed for, as a share of the period

double seconds(TimeNs ns) { return static_cast<double>(ns) * 1e-9; }

TimeNs nanoseconds(double s) { return static_cast<TimeNs>(std::llround(s * 1e9)); }

int standing_capacity(const Options& o) { return 3 * o.max_hypotheses + o.parents * Births::kMostChildren; }

}  // namespace

Posterior::Posterior(std::shared_ptr<const Model> m)
    : model(std::move(m)),
      layout(*model),
      motion(*model, layout),
      likelihood(*model, layout),
      births(*model, layout, likelihood),
      collector(*model),
      now(layout, standing_capacity(model->options)),
      next(layout, standing_capacity(model->options)),
      children(layout, std::max(1, model->options.parents * Births::kMostChildren)),
      channels(model->channels.size()),
      inputs(model->inputs.size()) {
  mode_on = {model->still.on, true, model->jolt.on};
  absorbed.resize(static_cast<std::size_t>(now.capacity()));
  Hypothesis& h = now.append();
  h.own_at.fill(-1);
  h.dim = layout.fixed;
  std::fill_n(h.cov, h.dim * h.dim, 0.0);
  for (int i = 0; i < layout.states; ++i) {
    const auto& s = model->states[static_cast<std::size_t>(i)];
    h.mean[i] = s.start;
    h.p(i, i) = s.start_sd * s.start_sd;
  }
  for (int i = layout.states; i < layout.core; ++i) {
    const auto& u = model->inputs[static_cast<std::size_t>(i - layout.states)];
    h.mean[i] = u.start;
    h.p(i, i) = u.sd * u.sd;
  }
  for (int j = 0; j < layout.channels; ++j) {
    const auto& c = model->channels[static_cast<std::size_t>(j)];
    const int bias = layout.bias_at[static_cast<std::size_t>(j)];
    if (bias >= 0) {
      h.mean[bias] = 0.0;
      h.p(bias, bias) = c.bias_sd * c.bias_sd;
    }
    h.noise[j] = {0.5 * c.prior_readings, 0.5 * c.prior_readings};
    auto& memory = channels[static_cast<std::size_t>(j)];
    memory.repeats = RepeatRate(c, model->response_s);
    memory.spec_sd = std::sqrt(likelihood.projector().spec_variance(h, j, 0.0));
    refresh_walks(j);
  }
}

// The parts that refer to model and layout are made anew; everything that has been learned is copied.
Posterior::Posterior(const Posterior& other)
    : model(other.model),
      layout(other.layout),
      motion(*model, layout),
      likelihood(*model, layout),
      births(*model, layout, likelihood),
      collector(*model),
      now(other.now),
      next(layout, other.next.capacity()),
      children(layout, other.children.capacity()),
      walk_density(other.walk_density),
      channels(other.channels),
      inputs(other.inputs),
      mode_on(other.mode_on),
      absorbed(other.absorbed.size()),
      started(other.started),
      predicted_to(other.predicted_to),
      time(other.time),
      log_evidence(other.log_evidence) {}

void Posterior::refresh_walks(int channel) {
  const auto j = static_cast<std::size_t>(channel);
  for (std::size_t c = 0; c < kConditions; ++c) {
    const double step = kWalk[c] * channels[j].spec_sd;
    walk_density[c][j] = step * step / model->response_s;
  }
}

void Posterior::start(TimeNs t) {
  started = true;
  time = predicted_to = t;
  for (std::size_t i = 0; i < inputs.size(); ++i) {
    inputs[i].expires = model->inputs[i].period_s > 0.0;
    inputs[i].good_until = t + nanoseconds(model->inputs[i].period_s);
  }
}

unsigned Posterior::unknown_inputs(TimeNs t) const {
  unsigned mask = 0;
  for (std::size_t i = 0; i < inputs.size(); ++i)
    if (!inputs[i].good || (inputs[i].expires && t >= inputs[i].good_until)) mask |= 1U << i;
  return mask;
}

TimeNs Posterior::next_expiry(TimeNs from, TimeNs to) const {
  TimeNs soonest = to;
  for (const auto& input : inputs)
    if (input.good && input.expires && input.good_until > from && input.good_until < soonest)
      soonest = input.good_until;
  return soonest;
}

// Every hypothesis goes into each machine mode it can reach; equal keys are mixed by moments at once, as in
// the interacting multiple model filter (Blom & Bar-Shalom 1988).
void Posterior::split_modes(double dt_s) {
  if (mode_gap_s != dt_s) {
    LinearSystem chain{CoreMatrix::Zero(kModes, kModes), CoreVector::Zero(kModes), CoreVector::Zero(kModes)};
    const auto link = [&](Mode from, Mode to, double every_s) {
      chain.rate(static_cast<int>(from), static_cast<int>(to)) = 1.0 / every_s;
    };
    if (mode_on[0]) {
      link(Mode::kUsual, Mode::kStill, model->still.every_s);
      link(Mode::kStill, Mode::kUsual, model->still.last_s);
    }
    if (mode_on[2]) {
      link(Mode::kUsual, Mode::kJolted, model->jolt.every_s);
      link(Mode::kJolted, Mode::kUsual, model->jolt.last_s);
    }
    if (mode_on[0] && mode_on[2]) link(Mode::kStill, Mode::kJolted, model->jolt.every_s);
    for (int i = 0; i < kModes; ++i) chain.rate(i, i) = -chain.rate.row(i).sum();
    Transition moved;
    discretise(chain, dt_s, moved);
    mode_switch = moved.transition;
    mode_gap_s = dt_s;
  }
  next.clear();
  for (int begin = 0; begin < now.size();) {
    const int end = now.group_end(begin);
    for (int to = 0; to < kModes; ++to) {
      if (!mode_on[static_cast<std::size_t>(to)]) continue;
      Hypothesis* target = nullptr;
      for (int i = begin; i < end; ++i) {
        const double p = mode_switch(static_cast<int>(now[i].mode), to);
        const double log_weight = now[i].log_weight + std::log(p);
        if (!(log_weight > std::log(model->options.weight_floor))) continue;
        if (!target) {
          target = &next.append_copy(now[i]);
          target->mode = static_cast<Mode>(to);
          target->log_weight = log_weight;
        } else {
          const double kept = now[i].log_weight;
          now[i].log_weight = log_weight;
          merge(*target, now[i], layout.channels);
          now[i].log_weight = kept;
        }
      }
    }
    begin = end;
  }
  collector.normalise(next, 2 * model->options.max_hypotheses, model->options.weight_floor);
}

void Posterior::predict_next(TimeNs t) {
  split_modes(seconds(t - predicted_to));
  for (TimeNs from = predicted_to; from < t;) {
    const TimeNs to = next_expiry(from, t);
    motion.prepare(from, to, unknown_inputs(from));
    for (int begin = 0; begin < next.size(); begin = next.group_end(begin))
      motion.predict(next.slice(begin, next.group_end(begin)), walk_density);
    from = to;
  }
}

void Posterior::advance(TimeNs t) {
  if (!started) start(t);
  time = t;
  if (t <= predicted_to) return;
  predict_next(t);
  std::swap(now, next);
  predicted_to = t;
}

// A scalar Kalman update of z's element `at`: what an input that was not known turned out to be.
void Posterior::condition_on_input(Hypothesis& h, int at, double value, double variance) const {
  const double total = h.p(at, at) + variance;
  if (!(total > 0.0)) return;
  const double e = value - h.mean[at];
  h.log_weight += log_normal(e, total);
  std::array<double, kMaxDim> column;
  for (int i = 0; i < h.dim; ++i) column[static_cast<std::size_t>(i)] = h.p(i, at);
  for (int i = 0; i < h.dim; ++i) {
    const double gain = column[static_cast<std::size_t>(i)] / total;
    h.mean[i] += gain * e;
    for (int k = 0; k < h.dim; ++k) h.p(i, k) -= gain * column[static_cast<std::size_t>(k)];
  }
}

void Posterior::set_input(TimeNs t, int input, double value, bool good) {
  advance(t);
  const auto& u = model->inputs[static_cast<std::size_t>(input)];
  auto& memory = inputs[static_cast<std::size_t>(input)];
  if (!good || value < u.lo || value > u.hi) {
    memory.good = false;
    return;
  }
  const bool was_unknown = unknown_inputs(t) >> static_cast<unsigned>(input) & 1U;
  const int at = layout.states + input;
  for (int i = 0; i < now.size(); ++i) {
    Hypothesis& h = now[i];
    if (was_unknown) condition_on_input(h, at, value, u.sd * u.sd);
    for (int k = 0; k < h.dim; ++k) h.p(at, k) = h.p(k, at) = 0.0;
    h.mean[at] = value;
    h.p(at, at) = u.sd * u.sd;
  }
  if (was_unknown) collector.normalise(now, now.capacity(), model->options.weight_floor);
  memory.good = true;
  memory.good_until = t + nanoseconds(u.period_s);
}

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
    const double stays = births.bear(now[parent], o, walk_density, log_floor, children);
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
  memory.last_censored = o.censoring != Censoring::kNone;
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

Fate Engine::read(TimeNs t, int channel, double value, Quality quality) {
  return impl_->read(t, channel, value, quality);
}

TimeNs Engine::time() const { return impl_->time; }
bool Engine::started() const { return impl_->started; }
double Engine::log_evidence() const { return impl_->log_evidence; }
const Model& Engine::model() const { return *impl_->model; }

}  // namespace steelyard::engine
