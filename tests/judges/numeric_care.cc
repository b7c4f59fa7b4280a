// SPDX-License-Identifier: Apache-2.0
// Millions of readings, and what rounding does to the posterior meanwhile: every hypothesis's covariance
// stays symmetric and positive, weights stay normalised, everything finite. Three machines: the axis whose
// channels fail and recover all the time; channels of sd 1e-9 and 1e6 side by side, with gaps from 1 µs to 30
// days and readings 1e9 away; and a stiff chain of four states.
//   numeric_care [--readings N] [--seed S]      N for each machine (by hand 10 million)
#include <Eigen/Dense>
#include <algorithm>
#include <array>
#include <cmath>
#include <cstdio>

#include "engine/posterior.h"
#include "judges/axis.h"
#include "judges/judge.h"

namespace steelyard::judges {
namespace {

constexpr double kMostAsymmetry = 1e-12;    // of p_ik and p_ki, over √(p_ii p_kk)
constexpr double kLeastEigenvalue = -1e-9;  // of the correlation matrix
constexpr int kLookEvery = 997;             // readings; a prime, so that all channels and phases are met

struct Worst {
  double asymmetry = 0.0;
  double eigenvalue = 1.0;
  double weights = 0.0;  ///< |Σ w − 1|
  double variance = 1e300;
  bool finite = true;
  long looks = 0;
};

void look_at(const engine::Hypothesis& h, Worst& worst) {
  const int d = h.dim;
  Eigen::MatrixXd scaled = Eigen::MatrixXd::Identity(d, d);
  for (int i = 0; i < d; ++i) {
    worst.variance = std::min(worst.variance, h.p(i, i));
    worst.finite = worst.finite && std::isfinite(h.mean[i]);
    for (int k = 0; k < d; ++k) {
      worst.finite = worst.finite && std::isfinite(h.p(i, k));
      const double scale = std::sqrt(h.p(i, i) * h.p(k, k));
      if (i == k || !(scale > 0.0)) continue;
      scaled(i, k) = 0.5 * (h.p(i, k) + h.p(k, i)) / scale;
      worst.asymmetry = std::max(worst.asymmetry, std::fabs(h.p(i, k) - h.p(k, i)) / scale);
    }
  }
  if (!worst.finite) return;
  const Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd> solver(scaled, Eigen::EigenvaluesOnly);
  worst.eigenvalue = std::min(worst.eigenvalue, solver.eigenvalues().minCoeff());
}

void look_at(const engine::Posterior& posterior, Worst& worst) {
  double sum = 0.0;
  for (int i = 0; i < posterior.now.size(); ++i) {
    sum += std::exp(posterior.now[i].log_weight);
    look_at(posterior.now[i], worst);
  }
  worst.finite = worst.finite && std::isfinite(sum) && std::isfinite(posterior.log_evidence);
  worst.weights = std::max(worst.weights, std::fabs(sum - 1.0));
  ++worst.looks;
}

class Looker {
 public:
  explicit Looker(std::shared_ptr<const engine::Model> model) : posterior_(std::move(model)) {}
  void read(engine::TimeNs t, int channel, double value) {
    posterior_.read(t, channel, value, engine::Quality::kGood);
    if (++count_ % kLookEvery == 0) look_at(posterior_, worst_);
  }
  [[nodiscard]] const Worst& worst() const { return worst_; }

 private:
  engine::Posterior posterior_;
  Worst worst_;
  long count_ = 0;
};

/// Every channel is offset, drifting, stuck or frozen for about a fifth of the time.
class Trouble {
 public:
  double shown(double healthy, double since_s, double sd, Random& random) {
    if (random.chance(0.001)) kind_ = static_cast<int>(random.uniform() * 10.0);
    double value = healthy;
    if (kind_ == 0) value += 30.0 * sd;
    if (kind_ == 1) value += sd * std::fmod(since_s, 100.0);
    if (kind_ == 2) value = last_;
    if (kind_ == 3) value = 1.0 + sd * random.normal();
    last_ = value;
    return value;
  }

 private:
  int kind_ = 9;
  double last_ = 0.0;
};

Worst run_axis(long readings, std::uint64_t seed) {
  Axis axis(seed, true);
  Random random(seed + 1);
  std::array<Trouble, Axis::kChannels> trouble;
  Looker looker(axis_model());
  for (long i = 0; i < readings / Axis::kChannels; ++i) {
    axis.step();
    for (int j = 0; j < Axis::kChannels; ++j) {
      const auto u = static_cast<std::size_t>(j);
      const double shown =
          trouble[u].shown(axis.reading(j), static_cast<double>(i) * Axis::kStepS, Axis::kSd[u], random);
      looker.read(1'000'000'000 + i * Axis::kStepNs, j, Axis::as_read(j, shown));
    }
  }
  return looker.worst();
}

engine::ChannelModel channel(const char* name, double sd, double bias_sd, double range,
                             std::vector<double> weights) {
  engine::ChannelModel c;
  c.name = name;
  c.reads = engine::AffineForm{std::move(weights), {}, 0.0};
  c.sd = sd;
  c.bias_sd = bias_sd;
  c.lo = -range;
  c.hi = range;
  return c;
}

Worst run_extremes(long readings, std::uint64_t seed) {
  using engine::AffineForm;
  constexpr std::array<engine::TimeNs, 6> kGapsNs{
      1'000, 1'000'000, 1'000'000'000, 3'600'000'000'000, 86'400'000'000'000, 30 * 86'400'000'000'000};
  // The longest gaps are rare enough for the clock to last: about 290 years of nanoseconds.
  constexpr std::array<double, 6> kUpTo{0.5, 0.9, 0.99, 0.9999, 0.999999, 1.0};
  auto model = std::make_shared<engine::Model>();
  model->states = {{"position", "m", 0.0, 10.0, 0.0, {}, AffineForm{{0.0, 1.0}, {}, 0.0}},
                   {"speed", "m/s", 0.0, 1.0, 0.3, {}, AffineForm{{0.0, 0.0}, {}, 0.0}}};
  model->channels = {channel("fine", 1e-9, 0.0, 1e10, {1.0, 0.0}),
                     channel("coarse", 1e6, 1e7, 1e10, {1.0, 0.0})};
  engine::set_defaults(*model, 1.0);
  Random random(seed);
  Looker looker(model);
  engine::TimeNs t = 0;
  for (long i = 0; i < readings / 2; ++i) {
    const double pick = random.uniform();
    const auto gap = std::lower_bound(kUpTo.begin(), kUpTo.end(), pick) - kUpTo.begin();
    t += kGapsNs[static_cast<std::size_t>(gap)];
    for (int j = 0; j < 2; ++j) {
      double value = random.normal() * model->channels[static_cast<std::size_t>(j)].sd;
      if (random.chance(0.01)) value = random.chance(0.5) ? 1e9 : -1e9;
      looker.read(t, j, value);
    }
  }
  return looker.worst();
}

// Four states in a row whose time constants lie four orders apart, two of them read.
Worst run_chain(long readings, std::uint64_t seed) {
  using engine::AffineForm;
  auto model = std::make_shared<engine::Model>();
  constexpr std::array<double, 4> kRate{0.01, 0.1, 1.0, 100.0};
  for (std::size_t i = 0; i < kRate.size(); ++i) {
    std::vector<double> row(kRate.size(), 0.0);
    row[i] = -kRate[i];
    if (i > 0) row[i - 1] = kRate[i];
    model->states.push_back({"x" + std::to_string(i + 1), "K", 0.0, 10.0, 0.1, {}, AffineForm{row, {}, 0.0}});
  }
  model->channels = {channel("first", 0.01, 0.01, 1e3, {1.0, 0.0, 0.0, 0.0}),
                     channel("last", 0.01, 0.01, 1e3, {0.0, 0.0, 0.0, 1.0}),
                     channel("again", 1e-6, 0.0, 1e3, {0.0, 0.0, 0.0, 1.0})};
  engine::set_defaults(*model, 10.0);
  Random random(seed);
  std::array<double, 4> x{};
  std::array<Trouble, 3> trouble;
  Looker looker(model);
  constexpr double kDt = 0.1;
  for (long i = 0; i < readings / 3; ++i) {
    for (std::size_t k = 0; k < x.size(); ++k) {
      const double target = k == 0 ? 0.0 : x[k - 1];
      x[k] = target + (x[k] - target) * std::exp(-kRate[k] * kDt) + 0.02 * random.normal();
    }
    for (int j = 0; j < 3; ++j) {
      const auto u = static_cast<std::size_t>(j);
      const double sd = model->channels[u].sd;
      const double healthy = (j == 0 ? x[0] : x[3]) + sd * random.normal();
      const double shown = trouble[u].shown(healthy, static_cast<double>(i) * kDt, sd, random);
      looker.read(i * 100'000'000LL, j, std::clamp(shown, -1e3, 1e3));
    }
  }
  return looker.worst();
}

void judge(const char* machine, const Worst& worst, Bounds& bounds) {
  std::printf(
      "%-10s %8ld looks; asymmetry %.1e, least eigenvalue of a correlation %.1e, least variance %.1e, "
      "weights "
      "off by %.1e\n",
      machine, worst.looks, worst.asymmetry, worst.eigenvalue, worst.variance, worst.weights);
  std::fflush(stdout);
  const std::string at = std::string(machine) + ": ";
  bounds.require(worst.looks > 0, at + "too few readings to look even once");
  bounds.require(worst.finite, at + "a number is not finite");
  bounds.require(worst.asymmetry <= kMostAsymmetry, at + "a covariance is not symmetric");
  bounds.require(worst.eigenvalue >= kLeastEigenvalue, at + "a covariance is not positive");
  bounds.require(worst.variance >= 0.0, at + "a variance is negative");
  bounds.require(worst.weights <= 1e-9, at + "weights do not sum to 1");
}

}  // namespace
}  // namespace steelyard::judges

int main(int argc, char** argv) {
  using namespace steelyard::judges;
  const Numbers options(argc, argv, {{"readings", 1e7}, {"seed", 1.0}});
  const auto readings = static_cast<long>(options["readings"]);
  const auto seed = static_cast<std::uint64_t>(options.whole("seed"));
  std::printf("seed %d, %ld readings a machine\n", options.whole("seed"), readings);
  Bounds bounds(false);
  judge("axis", run_axis(readings, seed), bounds);
  judge("extremes", run_extremes(readings, seed), bounds);
  judge("chain", run_chain(readings, seed), bounds);
  return bounds.exit_code();
}
