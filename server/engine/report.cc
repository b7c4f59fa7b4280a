// SPDX-License-Identifier: Apache-2.0
// What comes out at a moment (engine.md §5): moments and intervals of the mixture, trust and its reasons.
#include <algorithm>
#include <boost/math/special_functions/gamma.hpp>
#include <cmath>

#include "engine/normal.h"
#include "engine/posterior.h"
#include "engine/time.h"

namespace steelyard::engine {
namespace {

constexpr double kNegligible = 1e-9;  // weight under which a hypothesis does not move an interval
constexpr std::size_t kExplanations = 3;

using Policy = boost::math::policies::policy<boost::math::policies::promote_double<false>>;

// P(x ≤ value) under the mixture's marginal of z's element `at`.
double mixture_cdf(const Pool& pool, int at, double value) {
  double sum = 0.0;
  for (int i = 0; i < pool.size(); ++i) {
    const double w = std::exp(pool[i].log_weight);
    if (w < kNegligible) continue;
    const double sd = std::sqrt(std::max(pool[i].p(at, at), 0.0));
    const double step = value - pool[i].mean[at];
    sum += w * (sd > 0.0 ? normal_cdf(step / sd) : (step >= 0.0 ? 1.0 : 0.0));
  }
  return sum;
}

// Bisection from a bracket that holds every component to 8 sd; 60 halvings exhaust a double.
double mixture_quantile(const Pool& pool, int at, double p, double lo, double hi) {
  for (int i = 0; i < 60 && hi - lo > 1e-12 * (std::fabs(lo) + std::fabs(hi)); ++i) {
    const double middle = 0.5 * (lo + hi);
    (mixture_cdf(pool, at, middle) < p ? lo : hi) = middle;
  }
  return 0.5 * (lo + hi);
}

double mixture_density(const Pool& pool, int at, double value) {
  double sum = 0.0;
  for (int i = 0; i < pool.size(); ++i) {
    const double variance = pool[i].p(at, at);
    if (pool[i].log_weight < -20.0 || !(variance > 0.0)) continue;
    sum += std::exp(pool[i].log_weight + log_normal(value - pool[i].mean[at], variance));
  }
  return sum;
}

// Two local maxima, the lesser at least a tenth of the greater, with a valley under half of the lesser
// between.
bool two_peaked(const Pool& pool, int at, double lo, double hi) {
  constexpr int kGrid = 128;
  double first = 0.0;
  double valley = 0.0;
  double second = 0.0;
  double highest = 0.0;
  for (int i = 0; i <= kGrid; ++i) {
    const double d = mixture_density(pool, at, lo + (hi - lo) * i / kGrid);
    highest = std::max(highest, d);
    if (second == 0.0 && d >= first) {
      first = valley = d;
    } else if (d < valley) {
      valley = d;
      second = 0.0;
    } else if (d > 2.0 * valley) {
      second = std::max(second, d);
    }
    if (second > 0.0 && std::min(first, second) > 0.1 * std::max(highest, second) && valley < 0.5 * first)
      return true;
  }
  return false;
}

void report_state(const Pool& pool, int at, StateEstimate& out) {
  double mean = 0.0;
  for (int i = 0; i < pool.size(); ++i) mean += std::exp(pool[i].log_weight) * pool[i].mean[at];
  double variance = 0.0;
  for (int i = 0; i < pool.size(); ++i) {
    const double w = std::exp(pool[i].log_weight);
    const double step = pool[i].mean[at] - mean;
    variance += w * (pool[i].p(at, at) + step * step);
  }
  out.mean = mean;
  out.sd = std::sqrt(std::max(variance, 0.0));
  out.interval90 = {mean - 1.6448536269514722 * out.sd, mean + 1.6448536269514722 * out.sd};
  out.two_peaked = false;
  out.within_needs = 1.0;
}

void report_interval(const Pool& pool, int at, const StateModel& model, StateEstimate& out) {
  double lo = out.mean;
  double hi = out.mean;
  double narrow = 0.0;
  for (int i = 0; i < pool.size(); ++i) {
    const double w = std::exp(pool[i].log_weight);
    if (w < kNegligible) continue;
    const double sd = std::sqrt(std::max(pool[i].p(at, at), 0.0));
    lo = std::min(lo, pool[i].mean[at] - 8.0 * sd);
    hi = std::max(hi, pool[i].mean[at] + 8.0 * sd);
    narrow += w * sd * sd;
  }
  out.interval90 = {mixture_quantile(pool, at, 0.05, lo, hi), mixture_quantile(pool, at, 0.95, lo, hi)};
  // Two peaks need components that stand apart by more than their own width.
  out.two_peaked = narrow < 0.6 * out.sd * out.sd && two_peaked(pool, at, lo, hi);
  if (model.needs)
    out.within_needs =
        mixture_cdf(pool, at, out.mean + *model.needs) - mixture_cdf(pool, at, out.mean - *model.needs);
}

// A mean over hypotheses is no time of a reading: digits beyond the millisecond would only look like one.
TimeNs to_millisecond(double time_s) {
  constexpr TimeNs kMillisecond = 1'000'000;
  return (nanoseconds(time_s) + kMillisecond / 2) / kMillisecond * kMillisecond;
}

// Conditions relax while a channel does not read: the two-state chain of sound and not sound.
struct Relaxation {
  double stays = 1.0;     ///< P(sound after | sound before)
  double recovers = 0.0;  ///< P(sound after | not sound before)
  int ways = 1;           ///< conditions that share what is no longer sound
};

Relaxation relax(const ChannelModel& c, const Options& options, double age_s) {
  int ways = 0;
  for (int k = 1; k < kConditions; ++k) ways += options.conditions[static_cast<std::size_t>(k)];
  const double down = ways / (3.0 * c.fails_every_s);
  const double up = options.conditions[0] ? 1.0 / c.recovers_in_s : 0.0;
  if (!(up + down > 0.0)) return {};
  const double settled = up / (up + down);
  const double fade = std::exp(-(up + down) * age_s);
  return {settled + (1.0 - settled) * fade, settled * (1.0 - fade), std::max(ways, 1)};
}

// Noise of the channel over the hypotheses: average shape and mean, as in a merge.
Gamma average_noise(const Pool& pool, int channel) {
  double a = 0.0;
  double mean = 0.0;
  for (int i = 0; i < pool.size(); ++i) {
    const double w = std::exp(pool[i].log_weight);
    a += w * pool[i].noise[channel].a;
    mean += w * pool[i].noise[channel].mean();
  }
  return {a, a / mean};
}

void report_noise(const Gamma& g, const Options& options, double spec_sd, Detail detail, PartEstimate& out) {
  const double level = !options.learn_precision ? 1.0 : options.cap_precision ? mean_below_one(g) : g.mean();
  out.noise_sd = spec_sd / std::sqrt(level);
  out.noise_sd90 = {out.noise_sd, out.noise_sd};
  if (detail == Detail::kBrief || !options.learn_precision) return;
  // Quantiles of the precision, cut off at the datasheet's: noise falls as precision rises.
  const double mass = options.cap_precision ? boost::math::gamma_p(g.a, g.b, Policy()) : 1.0;
  const auto quantile = [&](double p) {
    const double x = boost::math::gamma_p_inv(g.a, std::clamp(p * mass, 1e-300, 1.0 - 1e-16), Policy()) / g.b;
    return options.cap_precision ? std::min(x, 1.0) : x;
  };
  out.noise_sd90 = {spec_sd / std::sqrt(quantile(0.95)), spec_sd / std::sqrt(quantile(0.05))};
}

void report_offset(const Pool& pool, int channel, int part, PartEstimate& out) {
  double weight = 0.0;
  double mean = 0.0;
  double square = 0.0;
  for (int i = 0; i < pool.size(); ++i) {
    if (!is_walk(pool[i].conditions.of(channel))) continue;
    const double w = std::exp(pool[i].log_weight);
    const int at = pool[i].own_at[static_cast<std::size_t>(channel)] + part;
    weight += w;
    mean += w * pool[i].mean[at];
    square += w * (pool[i].p(at, at) + pool[i].mean[at] * pool[i].mean[at]);
  }
  out.offset = weight > kNegligible ? mean / weight : 0.0;
  out.offset_sd =
      weight > kNegligible ? std::sqrt(std::max(square / weight - out.offset * out.offset, 0.0)) : 0.0;
}

// What is learned of one channel's precision, as it stands at a later moment.
class Precision {
 public:
  Precision(const Posterior& e, int channel, double keep)
      : e_(e),
        channel_(channel),
        parts_(e.layout.part_count[static_cast<std::size_t>(channel)]),
        keep_(keep) {
    const auto& c = e.model->channels[static_cast<std::size_t>(channel)];
    prior_ = prior_shape(c);
  }

  /// E[min(κ, 1)], of a vector channel in its worst direction.
  [[nodiscard]] double level(const Hypothesis& h) const {
    if (!e_.model->options.learn_precision) return 1.0;
    if (parts_ > 1) return VectorReading::level(relaxed(h.noise[channel_].a), relaxed(shape_of(h)));
    Gamma g = h.noise[channel_];
    forget(g, prior_, keep_);
    return mean_of_min_with_one(g);
  }
  [[nodiscard]] double prior_level() const {
    if (!e_.model->options.learn_precision) return 1.0;
    const double a = parts_ > 1 ? prior_ - 0.5 * (parts_ - 1) : prior_;
    return mean_of_min_with_one({a, a});
  }

  /// The Gamma of each part's relative precision, over the hypotheses.
  void by_part(const Pool& pool, std::array<Gamma, kMaxParts>& out) const {
    Gamma mean = average_noise(pool, channel_);
    if (parts_ == 1) {
      if (e_.model->options.forget) forget(mean, prior_, keep_);
      out[0] = mean;
      return;
    }
    PartsMatrix shape = PartsMatrix::Zero(parts_, parts_);
    for (int i = 0; i < pool.size(); ++i) shape += std::exp(pool[i].log_weight) * shape_of(pool[i]);
    const double a = relaxed(mean.a);
    PartsVector variance;
    e_.likelihood.vector().relative_variance(channel_, a, relaxed(shape), variance);
    const double half = a - 0.5 * (parts_ - 1);
    for (int p = 0; p < parts_; ++p) out[static_cast<std::size_t>(p)] = {half, half * variance(p)};
  }

 private:
  [[nodiscard]] PartsMatrix shape_of(const Hypothesis& h) const {
    return Eigen::Map<const Eigen::MatrixXd>(h.shape + e_.layout.shape_at[static_cast<std::size_t>(channel_)],
                                             parts_, parts_);
  }
  [[nodiscard]] double relaxed(double a) const { return prior_ + keep_ * (a - prior_); }
  // Between the mean and the identity; the exact way by the scatter differs little and costs an inverse more.
  [[nodiscard]] PartsMatrix relaxed(const PartsMatrix& mean) const {
    return keep_ * mean + (1.0 - keep_) * PartsMatrix::Identity(parts_, parts_);
  }

  const Posterior& e_;
  int channel_;
  int parts_;
  double keep_;
  double prior_ = 0.0;
};

void report_parts(const Posterior& e, const Memory& memory, const Pool& pool, int channel,
                  const Precision& precision, Detail detail, ChannelEstimate& out) {
  const auto j = static_cast<std::size_t>(channel);
  const int parts = e.layout.part_count[j];
  std::array<Gamma, kMaxParts> noise;
  precision.by_part(pool, noise);
  out.others.resize(static_cast<std::size_t>(parts - 1));
  for (int p = 0; p < parts; ++p) {
    PartEstimate part;
    report_noise(noise[static_cast<std::size_t>(p)], e.model->options,
                 memory.spec_sd[static_cast<std::size_t>(e.layout.first_part[j] + p)], detail, part);
    report_offset(pool, channel, p, part);
    if (p > 0) {
      out.others[static_cast<std::size_t>(p - 1)] = part;
      continue;
    }
    out.noise_sd = part.noise_sd;
    out.noise_sd90 = part.noise_sd90;
    out.offset = part.offset;
    out.offset_sd = part.offset_sd;
  }
}

void report_channel(const Posterior& e, const Memory& all, const Pool& pool, int channel, TimeNs t,
                    Detail detail, ChannelEstimate& out) {
  const auto j = static_cast<std::size_t>(channel);
  const auto& c = e.model->channels[j];
  const auto& options = e.model->options;
  const auto& memory = all.channels[j];
  const double gap_s = memory.fused_any ? seconds(t - memory.judged_at) : 0.0;
  const Precision precision(e, channel, options.forget ? std::exp2(-gap_s / c.memory_s) : 1.0);
  out.probability.fill(0.0);
  double trusted = 0.0;
  double since_s = 0.0;
  for (int i = 0; i < pool.size(); ++i) {
    const double w = std::exp(pool[i].log_weight);
    const Condition condition = pool[i].conditions.of(channel);
    out.probability[static_cast<std::size_t>(condition)] += w;
    if (condition != Condition::kSound) since_s += w * pool[i].since[channel];
    if (condition == Condition::kSound && w > 1e-12) trusted += w * precision.level(pool[i]);
  }
  const double sound = std::min(out.probability[0], 1.0);
  double unsound = 0.0;
  for (std::size_t k = 1; k < kConditions; ++k) unsound += out.probability[k];
  out.unsound_since_ns = unsound > kNegligible ? to_millisecond(since_s / unsound) : 0;
  const Relaxation r = relax(c, options, gap_s);
  const double fresh = (1.0 - sound) * r.recovers;
  const double relaxed = sound * r.stays + fresh;
  out.trust = std::clamp(trusted * r.stays + fresh * precision.prior_level(), 0.0, 1.0);
  for (std::size_t k = 1; k < kConditions; ++k)
    out.probability[k] = out.probability[k] * (1.0 - r.recovers) +
                         (options.conditions[k] ? sound * (1.0 - r.stays) / r.ways : 0.0);
  out.probability[0] = relaxed;
  report_parts(e, all, pool, channel, precision, detail, out);
  out.age_s = memory.seen_any ? seconds(t - memory.seen_at) : -1.0;
  out.silent = e.silent(memory, channel, t);
  out.influence = memory.freedom * std::exp(-seconds(t - memory.freedom_at) / e.model->response_s);
  out.out_of_range = memory.out_of_range;
}

void share_influence(std::vector<ChannelEstimate>& channels) {
  double total = 0.0;
  for (const auto& c : channels) total += c.influence;
  for (auto& c : channels) c.influence = total > 0.0 ? c.influence / total : 0.0;
}

// One finding for each part of each channel that the hypothesis has unsound.
void report_findings(const Hypothesis& h, const Posterior& e, std::vector<Finding>& out) {
  for (int j = 0; j < e.layout.channels; ++j) {
    const auto u = static_cast<std::size_t>(j);
    const Condition condition = h.conditions.of(j);
    if (condition == Condition::kSound) continue;
    for (int p = 0; p < e.layout.part_count[u]; ++p) {
      const int at = h.own_at[u] < 0 ? -1 : h.own_at[u] + p;
      Finding f{j, condition, 0.0, 0.0, p, to_millisecond(h.since[j])};
      f.offset = at >= 0 ? h.mean[at] : e.last_values[static_cast<std::size_t>(e.layout.first_part[u] + p)];
      f.offset_sd = at >= 0 ? std::sqrt(std::max(h.p(at, at), 0.0)) : 0.0;
      out.push_back(f);
    }
  }
}

// Hypotheses with equal conditions stand next to each other: their modes are summed over.
void report_explanations(const Pool& pool, const Posterior& e, std::vector<Explanation>& out) {
  out.clear();
  for (int begin = 0; begin < pool.size();) {
    const int end = pool.group_end(begin);
    Explanation found;
    int heaviest = begin;
    for (int i = begin; i < end; ++i) {
      found.probability += std::exp(pool[i].log_weight);
      if (pool[i].log_weight > pool[heaviest].log_weight) heaviest = i;
    }
    report_findings(pool[heaviest], e, found.findings);
    out.push_back(std::move(found));
    begin = end;
  }
  std::stable_sort(out.begin(), out.end(),
                   [](const Explanation& a, const Explanation& b) { return a.probability > b.probability; });
  if (out.size() > kExplanations) out.resize(kExplanations);
}

}  // namespace

// A channel is all the likelier to have gone quiet the more periods it has missed; of each, a well channel
// may lose the reading on the way.
double Posterior::silent(const ChannelMemory& memory, int channel, TimeNs t) const {
  const auto& c = model->channels[static_cast<std::size_t>(channel)];
  const double period_s = c.on_change ? c.on_change->heartbeat_s : c.period_s;
  const double age_s = memory.seen_any ? seconds(t - memory.seen_at) : 0.0;
  if (!(period_s > 0.0) || age_s <= period_s) return 0.0;
  const double failed = -std::expm1(-age_s / c.fails_every_s);
  const double log_odds = std::log(failed) - memory.losses.log_lost(age_s / period_s - 1.0);
  return 1.0 / (1.0 + std::exp(-log_odds));
}

void report(const Posterior& e, const Memory& memory, const Pool& pool, TimeNs t, Detail detail,
            Estimate& out) {
  out.time_ns = t;
  out.states.resize(e.model->states.size());
  out.inputs.resize(e.model->inputs.size());
  out.inputs_sd.resize(e.model->inputs.size());
  out.channels.resize(e.model->channels.size());
  for (int i = 0; i < e.layout.states; ++i) {
    auto& state = out.states[static_cast<std::size_t>(i)];
    report_state(pool, i, state);
    if (detail == Detail::kFull)
      report_interval(pool, i, e.model->states[static_cast<std::size_t>(i)], state);
  }
  StateEstimate input;
  for (int i = e.layout.states; i < e.layout.core; ++i) {
    report_state(pool, i, input);
    out.inputs[static_cast<std::size_t>(i - e.layout.states)] = input.mean;
    out.inputs_sd[static_cast<std::size_t>(i - e.layout.states)] = input.sd;
  }
  for (int j = 0; j < e.layout.channels; ++j)
    report_channel(e, memory, pool, j, t, detail, out.channels[static_cast<std::size_t>(j)]);
  share_influence(out.channels);
  out.mode.fill(0.0);
  for (int i = 0; i < pool.size(); ++i)
    out.mode[static_cast<std::size_t>(pool[i].mode)] += std::exp(pool[i].log_weight);
  out.hypotheses = pool.size();
  out.explanations.clear();
  if (detail == Detail::kFull) report_explanations(pool, e, out.explanations);
}

void Engine::estimate(TimeNs t, Detail detail, Estimate& out) {
  Posterior& e = *impl_;
  const bool ahead = e.started && t > e.predicted_to;
  if (ahead) e.predict_next(t);
  report(e, e, ahead ? e.next : e.now, t, detail, out);
}

}  // namespace steelyard::engine
