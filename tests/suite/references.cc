// SPDX-License-Identifier: Apache-2.0
// The references that need few lines: fixed, gated, mid value, told; and the loop that runs them all.
#include "suite/references.h"

#include <Eigen/LU>
#include <algorithm>
#include <cmath>
#include <map>

#include "suite/policy.h"

namespace steelyard::suite {
namespace {

// 99 % quantiles of χ² with one and two degrees of freedom.
constexpr std::array<double, 2> kGate{6.6348966010212145, 9.210340371976184};

class Fixed final : public Policy {
 public:
  using Policy::Policy;
  void take(int step, Filter& filter) override {
    for (int j = 0; j < channels(); ++j)
      if (came(j, step)) fuse(j, step, declared_variance(j), filter);
  }
};

class Gated final : public Policy {
 public:
  using Policy::Policy;
  void take(int step, Filter& filter) override {
    for (int j = 0; j < channels(); ++j)
      if (came(j, step) && distance(j, step, filter) <= kGate[static_cast<std::size_t>(channel(j).parts - 1)])
        fuse(j, step, declared_variance(j), filter);
  }

 private:
  // Normalised square of the innovation, of both parts of a vector channel.
  [[nodiscard]] double distance(int j, int step, const Filter& filter) const {
    const int first = run().machine.first_part(j);
    const double r = declared_variance(j);
    Eigen::Vector2d e = Eigen::Vector2d::Zero();
    Eigen::Matrix2d s = Eigen::Matrix2d::Identity();
    std::array<Expected, 2> expected;
    for (int p = 0; p < channel(j).parts; ++p) {
      expected[static_cast<std::size_t>(p)] = filter.expect(first + p);
      const Expected& x = expected[static_cast<std::size_t>(p)];
      e[p] = residual(channel(j), value(first + p, step), x.value);
      s(p, p) = filter.variance(x.h) + r;
    }
    if (channel(j).parts == 2)
      s(0, 1) = s(1, 0) = (expected[0].h * filter.P * expected[1].h.transpose()).value();
    return e.dot(s.inverse() * e);
  }
};

class MidValue final : public Policy {
 public:
  using Policy::Policy;
  void take(int step, Filter& filter) override {
    std::map<int, std::vector<std::pair<double, double>>> votes;  // value, variance; by what is read
    std::map<int, int> part;
    for (int j = 0; j < channels(); ++j) {
      if (!came(j, step)) continue;
      const int first = run().machine.first_part(j);
      const int same = channel(j).same_as;
      if (same < 0) {
        fuse(j, step, declared_variance(j), filter);
        continue;
      }
      votes[same].emplace_back(value(first, step), declared_variance(j));
      part[same] = first;
    }
    for (auto& [same, all] : votes) {
      const auto [y, r] = middle(all);
      const Expected x = filter.expect(part[same]);
      filter.update(x.h, y - x.value, r);
    }
  }

 private:
  // Of an even number: the mean of the two in the middle.
  static std::pair<double, double> middle(std::vector<std::pair<double, double>>& all) {
    std::sort(all.begin(), all.end());
    const std::size_t half = all.size() / 2;
    if (all.size() % 2 == 1) return all[half];
    return {0.5 * (all[half - 1].first + all[half].first), 0.25 * (all[half - 1].second + all[half].second)};
  }
};

class Told final : public Policy {
 public:
  using Policy::Policy;
  void take(int step, Filter& filter) override {
    for (int j = 0; j < channels(); ++j) {
      const Note n = note(j, step);
      if (!came(j, step) || n == Note::kWild || n == Note::kHeld) continue;
      const Fault* f = fault_at(run().row, j, step * run().machine.step_s);
      if (f && f->kind != Kind::kNoise && f->kind != Kind::kStrays) continue;
      fuse(j, step, noise(j, f, filter), filter);
    }
    before_ = filter.x.head(filter.own());
  }

 private:
  [[nodiscard]] double noise(int j, const Fault* f, const Filter& filter) const {
    const Channel& c = channel(j);
    const double factor = f && f->kind == Kind::kNoise ? f->size : 1.0;
    double r = factor * factor * c.sd * c.sd + rounding(c);
    // Noise ahead of a damping is correlated; white noise of the same power at low frequencies has this
    // variance.
    if (c.damping_s > 0.0) {
      const double kept = std::exp(-c.period_s / c.damping_s);
      r *= (1.0 + kept) / (1.0 - kept);
    }
    if (c.time_jitter_s > 0.0 && before_.size() > 0) r += std::pow(rate(j, filter) * c.time_jitter_s, 2);
    return r;
  }
  // Of what the channel shows, as this filter believes.
  [[nodiscard]] double rate(int j, const Filter& filter) const {
    const int part = run().machine.first_part(j);
    RowVector unused = RowVector::Zero(filter.own());
    const double past = run().machine.filter.reads(part, before_, unused);
    return (filter.expect(part).value - past) / run().machine.step_s;
  }
  Vector before_;  // state after the last step
};

std::unique_ptr<Policy> make(const Run& run, Reference which) {
  switch (which) {
    case Reference::kTold:
      return make_told(run);
    case Reference::kInformed:
      return make_informed(run);
    case Reference::kGated:
      return std::make_unique<Gated>(run);
    case Reference::kMedian:
      return std::make_unique<MidValue>(run);
    case Reference::kVariational:
      return make_variational(run);
    case Reference::kFixed:
      break;
  }
  return std::make_unique<Fixed>(run);
}

bool knows_the_truth(Reference which) { return which == Reference::kTold || which == Reference::kInformed; }

}  // namespace

std::unique_ptr<Policy> make_told(const Run& run) { return std::make_unique<Told>(run); }

void Policy::fuse(int j, int step, double r, Filter& filter) const {
  const int first = run_.machine.first_part(j);
  for (int part = first; part < first + channel(j).parts; ++part) {
    const Expected x = filter.expect(part);
    filter.update(x.h, residual(channel(j), value(part, step), x.value), r);
  }
}

double residual(const Channel& c, double y, double expected) {
  return c.modulo > 0.0 ? std::remainder(y - expected, c.modulo) : y - expected;
}

Run make_run(const Machine& machine, const Row& row, const Truth& truth, const Readings& readings) {
  Run run{machine, row, truth, readings, channels_of(machine, row), {}, machine.filter.unrest};
  for (std::size_t j = 0; j < run.channels.size(); ++j)
    run.sd.push_back(run.channels[j].sd *
                     (row.declared.sd_factors.empty() ? 1.0 : row.declared.sd_factors[j]));
  run.unrest *= row.declared.unrest_factor;
  return run;
}

Track reference(const Run& run, Reference which) {
  Filter filter(run.machine.filter, knows_the_truth(which) ? run.machine.filter.unrest : run.unrest);
  const auto policy = make(run, which);
  const auto judged = static_cast<int>(run.machine.judged.size());
  Track out;
  out.mean.reserve(static_cast<std::size_t>(run.machine.steps));
  out.sd.reserve(static_cast<std::size_t>(run.machine.steps));
  for (int i = 0; i < run.machine.steps; ++i) {
    if (i > 0) filter.predict(run.truth.input[static_cast<std::size_t>(i - 1)]);
    policy->take(i, filter);
    Vector mean(judged);
    Vector sd(judged);
    for (int k = 0; k < judged; ++k) {
      const int s = run.machine.judged[static_cast<std::size_t>(k)].state;
      mean[k] = filter.x[s];
      sd[k] = std::sqrt(filter.P(s, s));
    }
    out.mean.push_back(mean);
    out.sd.push_back(sd);
  }
  return out;
}

}  // namespace steelyard::suite
