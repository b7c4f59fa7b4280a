// SPDX-License-Identifier: Apache-2.0
// The posterior before any reading, and its way from one time to another (engine.md §3): machine modes split
// and mix, hypotheses move, inputs hold or become unknown.
#include "engine/posterior.h"

#include <algorithm>
#include <cmath>

#include "engine/normal.h"
#include "engine/settle.h"
#include "engine/time.h"

namespace steelyard::engine {
namespace {

// Walk speeds of creeping, offset, wandering and stuck, in datasheet sd per √R (engine.md §2).
constexpr std::array<double, kConditions> kWalk{0.0, 0.02, 3.5, 30.0, 0.05, 0.0};
// A creeping channel's rate: its size at first in datasheet sd per R, and its own walk in that per √R.
constexpr double kFirstRate = 1.0;
constexpr double kRateWalk = 0.03;

int children_capacity(const Model& m) {
  return std::max(1, m.options.parents * Births::most_children(static_cast<int>(m.common.size()) + 1));
}

int standing_capacity(const Model& m) { return 3 * m.options.max_hypotheses + children_capacity(m); }

}  // namespace

Posterior::Posterior(std::shared_ptr<const Model> m, bool with_lineage)
    : Memory{std::vector<ChannelMemory>(m->channels.size()), {}},
      model(std::move(m)),
      layout(*model, with_lineage),
      motion(*model, layout),
      likelihood(*model, layout),
      births(*model, layout, likelihood),
      collector(*model, layout),
      now(layout, standing_capacity(*model)),
      next(layout, standing_capacity(*model)),
      children(layout, children_capacity(*model)),
      inputs(model->inputs.size()) {
  mode_on = {model->still.on, model->still.on, true, model->jolt.on};
  absorbed.resize(static_cast<std::size_t>(now.capacity()));
  Hypothesis& h = now.append();
  h.own_at.fill(-1);
  h.dim = layout.fixed;
  std::fill_n(h.cov, h.dim * h.dim, 0.0);
  std::fill_n(h.mean, h.dim, 0.0);
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
  groups.reserve(kMaxGroups);
  for (int j = 0; j < layout.channels; ++j) {
    const auto u = static_cast<std::size_t>(j);
    const auto& c = model->channels[u];
    for (int i = 0; i < c.parts(); ++i) {
      const int bias = layout.bias_at[static_cast<std::size_t>(layout.first_part[u] + i)];
      if (bias >= 0) h.p(bias, bias) = c.part(i).bias_sd * c.part(i).bias_sd;
    }
    likelihood.start_noise(h, j);
    h.walk[j] = kFirstWalk;
    h.since[j] = 0.0;
    channels[u].repeats = RepeatRate(c, model->response_s);
    channels[u].losses = LossRate(model->response_s);
    refresh_walks(h, j, 0.0);
  }
}

Posterior::~Posterior() = default;

// The parts that refer to model and layout are made anew; everything that has been learned is copied.
Posterior::Posterior(const Posterior& other)
    : Memory(other),
      model(other.model),
      layout(other.layout),
      motion(*model, layout),
      likelihood(*model, layout),
      births(*model, layout, likelihood),
      collector(*model, layout),
      now(other.now),
      next(layout, other.next.capacity()),
      children(layout, other.children.capacity()),
      walks(other.walks),
      last_values(other.last_values),
      inputs(other.inputs),
      mode_on(other.mode_on),
      absorbed(other.absorbed.size()),
      started(other.started),
      predicted_to(other.predicted_to),
      time(other.time),
      log_evidence(other.log_evidence) {
  groups.reserve(kMaxGroups);
}

void Posterior::refresh_walks(const Hypothesis& h, int channel, double time_s) {
  const auto j = static_cast<std::size_t>(channel);
  for (int i = 0; i < layout.part_count[j]; ++i) {
    const auto p = static_cast<std::size_t>(layout.first_part[j] + i);
    spec_sd[p] = std::sqrt(likelihood.projector().spec_variance(h, channel, i, time_s));
    for (std::size_t c = 0; c < kConditions; ++c) {
      const double step = kWalk[c] * spec_sd[p];
      walks.own[c][p] = step * step / model->response_s;
    }
    const double first = kFirstRate * spec_sd[p] / model->response_s;
    const double change = kRateWalk * spec_sd[p] / model->response_s;
    walks.first_rate[p] = first * first;
    walks.rate[p] = change * change / model->response_s;
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

// Every hypothesis goes into each machine mode it can reach; equal keys are mixed by moments at once, as in
// the interacting multiple model filter (Blom & Bar-Shalom 1988).
void Posterior::split_modes(double dt_s) {
  if (mode_gap_s != dt_s) {
    LinearSystem chain{CoreMatrix::Zero(kModes, kModes), CoreVector::Zero(kModes), CoreVector::Zero(kModes)};
    const auto link = [&](Mode from, Mode to, double every_s) {
      chain.rate(static_cast<int>(from), static_cast<int>(to)) = 1.0 / every_s;
    };
    if (model->still.on) {
      link(Mode::kUsual, Mode::kStill, model->still.every_s);
      link(Mode::kStill, Mode::kUsual, model->still.last_s);
      link(Mode::kStill, Mode::kResting, model->still.every_s);
      link(Mode::kResting, Mode::kStill, model->still.last_s);
    }
    if (model->jolt.on) {
      link(Mode::kUsual, Mode::kJolted, model->jolt.every_s);
      link(Mode::kJolted, Mode::kUsual, model->jolt.last_s);
    }
    if (model->still.on && model->jolt.on) {
      link(Mode::kStill, Mode::kJolted, model->jolt.every_s);
      link(Mode::kResting, Mode::kJolted, model->jolt.every_s);
    }
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
          merge(*target, now[i], layout);
          now[i].log_weight = kept;
        }
      }
    }
    begin = end;
  }
  collector.normalise(next, 2 * model->options.max_hypotheses, model->options.weight_floor);
}

void Posterior::predict_next(TimeNs t, Trails* trails) {
  split_modes(seconds(t - predicted_to));
  if (trails) trails->start(next);
  for (TimeNs from = predicted_to; from < t;) {
    const TimeNs to = next_expiry(from, t);
    motion.prepare(from, to, unknown_inputs(from));
    for (int begin = 0; begin < next.size(); begin = next.group_end(begin)) {
      const int end = next.group_end(begin);
      motion.predict(next.slice(begin, end), walks, trails ? trails->of_group(begin, end) : Trail{});
    }
    from = to;
  }
}

void Posterior::advance(TimeNs t) {
  if (!started) start(t);
  time = t;
  if (t <= predicted_to) return;
  if (settler) settler->close(*this, t);
  predict_next(t, settler ? &settler->trails() : nullptr);
  if (settler) settler->moved(predicted_to, t, walks);
  std::swap(now, next);
  predicted_to = t;
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
  heed_silence(t);
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
  if (settler) settler->input_reset(input);
  memory.good = true;
  memory.good_until = t + nanoseconds(u.period_s);
}

}  // namespace steelyard::engine
