// SPDX-License-Identifier: Apache-2.0
#include "suite/variational.h"

#include <Eigen/Cholesky>
#include <cmath>

#include "suite/policy.h"

namespace steelyard::suite {
namespace {

constexpr int kRounds = 5;
constexpr double kPriorReadings = 10.0;  // as many as the engine's datasheet prior is worth
// The paper's ρ, exp(−4) of the past forgotten a step.
const double kKept = 1.0 - std::exp(-4.0);

class Variational final : public Policy {
 public:
  explicit Variational(const Run& run) : Policy(run) {
    for (int j = 0; j < channels(); ++j)
      for (int p = 0; p < channel(j).parts; ++p)
        noise_.push_back({0.5 * kPriorReadings, 0.5 * kPriorReadings * declared_variance(j)});
  }

  void take(int step, Filter& filter) override {
    std::vector<Observed> readings;
    for (int j = 0; j < channels(); ++j) {
      if (!came(j, step)) continue;
      const int first = run().machine.first_part(j);
      for (int p = first; p < first + channel(j).parts; ++p) {
        Learned& learned = noise_[static_cast<std::size_t>(p)];
        learned.shape *= kKept;
        learned.scale *= kKept;
        const Expected x = filter.expect(p);
        readings.push_back({x.h, residual(channel(j), value(p, step), x.value), &learned});
      }
    }
    fuse_variationally(readings, kRounds, filter);
  }

 private:
  std::vector<Learned> noise_;  // by part
};

}  // namespace

void fuse_variationally(const std::vector<Observed>& readings, int rounds, Filter& filter) {
  const auto m = static_cast<int>(readings.size());
  if (m == 0) return;
  Matrix H(m, filter.size());
  Vector e(m);
  std::vector<double> scale;  // before this step's readings
  for (int i = 0; i < m; ++i) {
    const Observed& o = readings[static_cast<std::size_t>(i)];
    H.row(i) = o.h;
    e[i] = o.residual;
    o.noise->shape += 0.5;
    scale.push_back(o.noise->scale);
  }
  const Vector x = filter.x;
  const Matrix P = filter.P;
  for (int round = 0; round < rounds; ++round) {
    Matrix S = H * P * H.transpose();
    for (int i = 0; i < m; ++i) {
      const Learned& n = *readings[static_cast<std::size_t>(i)].noise;
      S(i, i) += n.scale / n.shape;
    }
    const Matrix gain = Eigen::LDLT<Matrix>(S).solve(H * P).transpose();
    filter.x = x + gain * e;
    filter.P = P - gain * S * gain.transpose();
    const Vector left = e - H * (filter.x - x);
    for (int i = 0; i < m; ++i) {
      Learned& n = *readings[static_cast<std::size_t>(i)].noise;
      n.scale = scale[static_cast<std::size_t>(i)] + 0.5 * left[i] * left[i] +
                0.5 * (H.row(i) * filter.P * H.row(i).transpose()).value();
    }
  }
}

std::unique_ptr<Policy> make_variational(const Run& run) { return std::make_unique<Variational>(run); }

}  // namespace steelyard::suite
