// SPDX-License-Identifier: Apache-2.0
// What must not matter to trust: the units, and the order in which channels are declared.
#include <gtest/gtest.h>

#include <algorithm>
#include <numeric>

#include "outside/machines.h"
#include "suite/trolley.h"

namespace steelyard::outside {
namespace {

constexpr std::uint64_t kSeed = 1;

engine::TimeNs time_of(int step) { return kSecond + step * (kSecond / 50); }

using Trusts = std::vector<std::array<double, suite::kChannels>>;

// Fuses each moment's readings in the order of the suite's channels; place[j] is channel j's number in the
// model; values are multiplied by `unit`.
Trusts trusts(const engine::Model& model, const suite::Readings& readings, const std::array<int, 4>& place,
              double unit) {
  engine::Engine machine(std::make_shared<const engine::Model>(model));
  engine::Estimate e;
  Trusts out;
  for (int i = 0; i < suite::kSteps; ++i) {
    for (std::size_t j = 0; j < suite::kChannels; ++j)
      machine.read(time_of(i), place[j], unit * readings.value[j][static_cast<std::size_t>(i)],
                   engine::Quality::kGood);
    machine.estimate(time_of(i), engine::Detail::kBrief, e);
    out.emplace_back();
    for (std::size_t j = 0; j < suite::kChannels; ++j)
      out.back()[j] = e.channels[static_cast<std::size_t>(place[j])].trust;
  }
  return out;
}

double worst_difference(const Trusts& a, const Trusts& b) {
  double worst = 0.0;
  for (std::size_t i = 0; i < a.size(); ++i)
    for (std::size_t j = 0; j < suite::kChannels; ++j) worst = std::max(worst, std::fabs(a[i][j] - b[i][j]));
  return worst;
}

engine::Model scaled(engine::Model model, double unit) {
  for (auto& s : model.states) {
    s.start *= unit;
    s.start_sd *= unit;
    s.unrest *= unit;
  }
  for (auto& c : model.channels)
    for (double* value : {&c.sd, &c.bias_sd, &c.lo, &c.hi, &c.resolution, &c.offset_size}) *value *= unit;
  return model;
}

// The suite's rows whose trust moves most.
std::vector<suite::Row> rows() {
  std::vector<suite::Row> out;
  for (const char* name : {"offset 4 sd on a", "noise x10 on d", "frozen a + offset b", "drift a + drift b"})
    out.push_back(*std::find_if(suite::table().begin(), suite::table().end(),
                                [&](const suite::Row& row) { return row.name == name; }));
  return out;
}

constexpr std::array<int, 4> kAsDeclared{0, 1, 2, 3};

TEST(Invariance, UnitsDoNotMatter) {
  for (const auto& row : rows()) {
    const auto readings = suite::read(suite::simulate(kSeed), row, kSeed);
    const auto model = *suite::axis_model({}, row);
    const Trusts here = trusts(model, readings, kAsDeclared, 1.0);
    const double worst = worst_difference(here, trusts(scaled(model, 1000.0), readings, kAsDeclared, 1000.0));
    std::printf("%s: %.1e\n", row.name.c_str(), worst);
    EXPECT_LT(worst, 1e-6) << row.name;
  }
}

TEST(Invariance, OrderOfChannelsDoesNotMatter) {
  for (const auto& row : rows()) {
    const auto readings = suite::read(suite::simulate(kSeed), row, kSeed);
    const auto model = *suite::axis_model({}, row);
    const Trusts here = trusts(model, readings, kAsDeclared, 1.0);
    for (const std::array<int, 4>& place : {std::array<int, 4>{3, 2, 1, 0}, {2, 0, 3, 1}}) {
      engine::Model shuffled = model;
      for (std::size_t j = 0; j < suite::kChannels; ++j)
        shuffled.channels[static_cast<std::size_t>(place[j])] = model.channels[j];
      const double worst = worst_difference(here, trusts(shuffled, readings, place, 1.0));
      std::printf("%s: %.1e\n", row.name.c_str(), worst);
      EXPECT_LT(worst, 1e-6) << row.name;
    }
  }
}

}  // namespace
}  // namespace steelyard::outside
