// SPDX-License-Identifier: Apache-2.0
// The information limit: a filter that knows a fault's kind, law and time, but not its size. What a fault
// adds is a state from its beginning to its end, with the true law; a lag or a damping is the lag's own
// state; a channel that tells nothing (frozen, stuck, garbage) is dropped. Deadbands are intervals, damped
// noise is damped noise.
#include <algorithm>
#include <cmath>
#include <numbers>

#include "suite/policy.h"

namespace steelyard::suite {
namespace {

// Prior of an unknown size, in sd (offset, hum, drift per response time …).
constexpr double kSizeSd = 100.0;

double share_of(double period_s, double time_constant_s) {
  return 1.0 - std::exp(-period_s / time_constant_s);
}

// A state that a fault or a damping adds, one a part.
struct Extra {
  int part;
  int channel;
  const Fault* fault;  // null: the transmitter's damping
  int index;           // in the filter
};

class Informed final : public Policy {
 public:
  explicit Informed(const Run& run) : Policy(run) {}

  void take(int step, Filter& filter) override {
    const double t_s = step * run().machine.step_s;
    end(t_s, filter);
    begin(t_s, filter);
    for (int j = 0; j < channels(); ++j) take_channel(j, step, t_s, filter);
    before_ = filter.x.head(filter.own());
  }

 private:
  void end(double t_s, Filter& filter) {
    for (std::size_t i = extras_.size(); i-- > 0;) {
      const Extra gone = extras_[i];
      if (!gone.fault || fault_at(run().row, gone.channel, t_s) == gone.fault) continue;
      filter.remove(gone.index);
      extras_.erase(extras_.begin() + static_cast<std::ptrdiff_t>(i));
      for (auto& e : extras_)
        if (e.index > gone.index) --e.index;
    }
  }

  void begin(double t_s, Filter& filter) {
    for (int j = 0; j < channels(); ++j) {
      if (!run().row.has(j)) continue;
      const Fault* f = fault_at(run().row, j, t_s);
      const bool damped = !f && channel(j).damping_s > 0.0;
      // The state of a factor begins with a reading that shows it.
      if (!damped && !(f && carries_state(f->kind) && f->kind != Kind::kScale)) continue;
      const int first = run().machine.first_part(j);
      for (int p = first; p < first + channel(j).parts; ++p)
        if (!find(p, f)) add(p, j, f, filter);
    }
  }

  void add(int part, int j, const Fault* f, Filter& filter) {
    const double sd = channel(j).sd;
    Extra extra{part, j, f, filter.append(0.0, kSizeSd * kSizeSd * sd * sd)};
    if (!f || f->kind == Kind::kLag) {
      // Starts from the true value, a damping with its noise at rest.
      Expected x = filter.expect(part);
      filter.become(extra.index, x.h, x.value);
      if (!f) filter.P(extra.index, extra.index) += sd * sd;
    }
    extras_.push_back(extra);
  }

  [[nodiscard]] const Extra* find(int part, const Fault* f) const {
    const auto it = std::find_if(extras_.begin(), extras_.end(),
                                 [&](const Extra& e) { return e.part == part && e.fault == f; });
    return it == extras_.end() ? nullptr : &*it;
  }

  static bool carries_state(Kind kind) { return adds(kind) || kind == Kind::kScale || kind == Kind::kLag; }
  static bool tells_nothing(const Fault* f) {
    return f && !carries_state(f->kind) && f->kind != Kind::kNoise && f->kind != Kind::kStrays;
  }

  void take_channel(int j, int step, double t_s, Filter& filter) {
    const Fault* f = fault_at(run().row, j, t_s);
    const Note n = note(j, step);
    if (n == Note::kNone || n == Note::kWild || tells_nothing(f)) return;
    const int first = run().machine.first_part(j);
    for (int p = first; p < first + channel(j).parts; ++p) take_part(p, j, f, n, step, filter);
  }

  void take_part(int part, int j, const Fault* f, Note n, int step, Filter& filter) {
    const Channel& c = channel(j);
    const double t_s = step * run().machine.step_s;
    const double y = value(part, step);
    if (c.modulo == 0.0 && (y <= c.lo || y >= c.hi)) return;  // an end of the range says little
    const Extra* e = find(part, f && carries_state(f->kind) ? f : nullptr);
    if (e && (!f || f->kind == Kind::kLag)) return fuse_lag(*e, step, filter);
    Expected x = filter.expect(part);
    const double r = noise(part, c, f, x);
    if (!e && f && f->kind == Kind::kScale) return begin_factor({part, j, f, 0}, y, r, filter);
    if (e) add_law(*e, t_s, filter, x);
    if (n == Note::kHeld || n == Note::kQuiet) return fuse_interval(part, j, x, r, step, filter);
    filter.update(x.h, residual(c, y, x.value), r);
  }

  [[nodiscard]] double noise(int part, const Channel& c, const Fault* f, const Expected& x) const {
    const double sd = f && f->kind == Kind::kNoise ? f->size * c.sd : c.sd;
    const double jitter = c.time_jitter_s > 0.0 && before_.size() > 0 ? rate(part, x) * c.time_jitter_s : 0.0;
    return sd * sd + rounding(c) + jitter * jitter;
  }

  // What a fault of unknown size makes of what is expected.
  void add_law(const Extra& e, double t_s, const Filter& filter, Expected& x) const {
    const double size = filter.x[e.index];
    if (e.fault->kind == Kind::kScale) {
      x.h *= 1.0 + size;
      x.h[e.index] = x.value;
      x.value *= 1.0 + size;
    } else {
      const double law = shape(*e.fault, run().machine.response_s, t_s);
      x.h[e.index] = law;
      x.value += law * size;
    }
  }

  // y = (1 + a)·shown + v gives a, as soon as the channel shows far more than its uncertainty. From a vague
  // prior instead, the filter would lock on to a wrong factor where the channel shows all but zero at first.
  void begin_factor(Extra e, double y, double r, Filter& filter) {
    constexpr double kFarMore = 10.0;
    const Expected before = filter.expect(e.part);
    if (std::fabs(before.value) < kFarMore * std::sqrt(filter.variance(before.h) + r)) return;
    e.index = filter.append(0.0, 1.0);
    const RowVector slope = -y / (before.value * before.value) * filter.expect(e.part).h;
    filter.become(e.index, slope, y / before.value - 1.0);
    filter.P(e.index, e.index) += r / (before.value * before.value);
    extras_.push_back(e);
  }

  // The lag's state ℓ ← (1 − share)·ℓ + share·(h·x + w); the reading is ℓ with the noise that stands behind
  // it. A damping has its noise w ahead (as loud as faults.cc makes it), a lag behind.
  void fuse_lag(const Extra& e, int step, Filter& filter) const {
    const Channel& c = channel(e.channel);
    const double lag_s = e.fault ? e.fault->size * run().machine.response_s : c.damping_s;
    const double share = share_of(c.period_s, lag_s);
    const double ahead = e.fault ? 0.0 : c.sd * c.sd * (2.0 - share) / share;
    const double behind = e.fault ? c.sd * c.sd : 0.0;
    const Expected x = filter.expect(e.part);
    RowVector next = share * x.h;
    next[e.index] += 1.0 - share;
    filter.become(e.index, next, share * x.value + (1.0 - share) * filter.x[e.index]);
    filter.P(e.index, e.index) += share * share * ahead;
    RowVector reads = RowVector::Zero(filter.size());
    reads[e.index] = 1.0;
    filter.update(reads, residual(c, value(e.part, step), filter.x[e.index]), behind + rounding(c));
  }

  // A measurement that lay within the deadband of the last one sent: the truncated normal's moments.
  void fuse_interval(int part, int j, const Expected& x, double r, int step, Filter& filter) const {
    const double last = last_sent(part, j, step);
    if (std::isnan(last)) return;
    const double s = filter.variance(x.h) + r;
    const double sd = std::sqrt(s);
    const double lo = (last - channel(j).deadband - x.value) / sd;
    const double hi = (last + channel(j).deadband - x.value) / sd;
    const auto cdf = [](double z) { return 0.5 * std::erfc(-z * std::numbers::sqrt2 / 2.0); };
    const auto pdf = [](double z) { return std::exp(-0.5 * z * z) / std::sqrt(2.0 * std::numbers::pi); };
    const double inside = cdf(hi) - cdf(lo);
    if (!(inside > 1e-8)) return;  // out of step with the filter: the next value sent settles it
    const double mean = (pdf(lo) - pdf(hi)) / inside;
    const double spread = 1.0 + (lo * pdf(lo) - hi * pdf(hi)) / inside - mean * mean;
    filter.condition(x.h, mean * sd, s, std::max(0.0, spread) * s);
  }

  [[nodiscard]] double last_sent(int part, int j, int step) const {
    for (int i = step; i >= 0; --i)
      if (note(j, i) == Note::kFresh) return value(part, i);
    return kNoReading;
  }

  [[nodiscard]] double rate(int part, const Expected& now) const {
    RowVector unused = RowVector::Zero(before_.size());
    return (now.value - run().machine.filter.reads(part, before_, unused)) / run().machine.step_s;
  }

  std::vector<Extra> extras_;
  Vector before_;
};

}  // namespace

std::unique_ptr<Policy> make_informed(const Run& run) { return std::make_unique<Informed>(run); }

}  // namespace steelyard::suite
