// SPDX-License-Identifier: Apache-2.0
// Affine forms by evaluation at 0 and at ± a large power of two along each axis.
#include "rig/affine.h"

#include <array>
#include <charconv>
#include <cmath>
#include <cstddef>
#include <cstdint>
#include <vector>

namespace steelyard::rig {
namespace {

constexpr int kPoints = 64;
constexpr double kTolerance = 1e-12;  // relative to the sum of the terms' sizes
constexpr double kTime = 1.7e9;

// A power of two, so that scaling is exact; large, so that a constant in the formula does not cost digits.
constexpr double kProbe = 1099511627776.0;  // 2^40

/// SplitMix64 (Steele, Lea, Flood 2014): a few lines that give the same points on every platform.
class Random {
 public:
  double uniform() {  // −1 to 1
    state_ += 0x9E3779B97F4A7C15ULL;
    std::uint64_t z = state_;
    z = (z ^ (z >> 30U)) * 0xBF58476D1CE4E5B9ULL;
    z = (z ^ (z >> 27U)) * 0x94D049BB133111EBULL;
    z ^= z >> 31U;
    return static_cast<double>(z >> 11U) * 0x1.0p-52 - 1.0;
  }

 private:
  std::uint64_t state_ = 20240229;
};

/// States and inputs in one row, so that each axis is treated alike.
struct Axes {
  engine::Formula& formula;
  std::size_t states;
  std::size_t inputs;

  [[nodiscard]] std::size_t size() const { return states + inputs; }
  [[nodiscard]] double at(const std::vector<double>& point) const {
    const std::span<const double> all(point);
    return formula.evaluate(all.first(states), all.subspan(states), kTime);
  }
};

// The probe leaves the last bits to chance (0.1 may come back as 0.10000000000000002): take the number of
// at most 12 digits where it is within them.
double without_rounding(double value) {
  std::array<char, 32> buffer{};
  const auto written =
      std::to_chars(buffer.data(), buffer.data() + buffer.size(), value, std::chars_format::scientific, 11);
  double rounded = value;
  std::from_chars(buffer.data(), written.ptr, rounded);
  return std::abs(rounded - value) <= 4e-15 * std::abs(value) ? rounded : value;
}

double slope(const Axes& axes, std::size_t axis) {
  std::vector<double> point(axes.size(), 0.0);
  point[axis] = kProbe;
  const double above = axes.at(point);
  point[axis] = -kProbe;
  return without_rounding((above - axes.at(point)) / (2.0 * kProbe)) + 0.0;  // no −0
}

bool agrees(const Axes& axes, const std::vector<double>& slopes, double constant,
            const std::vector<double>& point) {
  double sum = constant;
  double size = std::abs(constant);
  for (std::size_t i = 0; i < point.size(); ++i) {
    sum += slopes[i] * point[i];
    size += std::abs(slopes[i] * point[i]);
  }
  return std::isfinite(size) && std::abs(axes.at(point) - sum) <= kTolerance * size;  // false for nan
}

std::vector<double> random_point(std::span<const Region> regions, int number, Random& random) {
  std::vector<double> point;
  const double scale = std::pow(10.0, 1.5 + 4.5 * random.uniform());
  for (const Region& region : regions) {
    const double u = random.uniform();
    point.push_back(number % 2 == 0 ? region.centre + 3.0 * region.spread * u : scale * u);
  }
  return point;
}

}  // namespace

std::optional<engine::AffineForm> find_affine(engine::Formula& formula, std::span<const Region> states,
                                              std::span<const Region> inputs) {
  const Axes axes{formula, states.size(), inputs.size()};
  std::vector<Region> regions(states.begin(), states.end());
  regions.insert(regions.end(), inputs.begin(), inputs.end());

  const double constant = axes.at(std::vector<double>(axes.size(), 0.0)) + 0.0;  // no −0
  std::vector<double> slopes;
  for (std::size_t i = 0; i < axes.size(); ++i) slopes.push_back(slope(axes, i));

  Random random;
  for (int i = 0; i < kPoints; ++i) {
    if (!agrees(axes, slopes, constant, random_point(regions, i, random))) return std::nullopt;
  }
  const auto split = slopes.begin() + static_cast<std::ptrdiff_t>(states.size());
  return engine::AffineForm{{slopes.begin(), split}, {split, slopes.end()}, constant};
}

}  // namespace steelyard::rig
