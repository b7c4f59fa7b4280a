// SPDX-License-Identifier: Apache-2.0
// Observability on machines whose answer is known by hand.
#include "cli/observe.h"

#include <gtest/gtest.h>

#include <cmath>
#include <memory>
#include <string>

#include "rig/rig.h"

namespace steelyard::client {
namespace {

std::shared_ptr<const rig::Rig> load(const std::string& text) {
  rig::Loaded loaded = rig::load(text, "rig.yaml");
  for (const rig::Problem& problem : loaded.problems) ADD_FAILURE() << problem.text();
  return loaded.rig;
}

using Shown = std::vector<bool>;

// A mass that moves freely: the position shows the speed, the speed does not show the position.
const char* const kTrolley = R"(
rig: trolley
response: 1 s
states:
  place: {unit: m, start: 0, start_sd: 1}
  speed: {unit: m/s, start: 0, start_sd: 1}
motion: {place: speed}
unrest: {speed: 0.2}
channels:
  ruler: {reads: place, sd: 0.01, range: [-10, 10]}
  wheel: {reads: speed, sd: 0.05, range: [-5, 5]}
)";

TEST(Linearised, PlaceShowsSpeedAndNotTheOtherWay) {
  const auto rig = load(kTrolley);
  ASSERT_TRUE(rig);
  const Linearised at(*rig->model, start_of(*rig->model));
  EXPECT_EQ(at.shown_states({0}), (Shown{true, true}));
  EXPECT_EQ(at.shown_states({1}), (Shown{false, true}));
  EXPECT_EQ(at.shown_states({0, 1}), (Shown{true, true}));
  EXPECT_EQ(at.shown_states({}), (Shown{false, false}));
  EXPECT_EQ(at.shown_space({0}).rows(), 2);
  EXPECT_EQ(at.shown_space({1}).rows(), 1);
  EXPECT_TRUE(at.foretold(1, {0}));
  EXPECT_FALSE(at.foretold(0, {1}));
}

// A sum of two states shows neither, but what it reads is foretold by the two.
const char* const kSum = R"(
rig: sum
response: 1 s
states:
  a: {unit: m, start: 0, start_sd: 1}
  b: {unit: m, start: 0, start_sd: 1000}
channels:
  both: {reads: a + b, unit: m, sd: 0.01, range: [-10, 10]}
  first: {reads: a, sd: 0.01, range: [-10, 10]}
  second: {reads: b, sd: 0.01, range: [-10, 10]}
)";

TEST(Linearised, ASumShowsNeitherPart) {
  const auto rig = load(kSum);
  ASSERT_TRUE(rig);
  const Linearised at(*rig->model, start_of(*rig->model));
  EXPECT_EQ(at.shown_states({0}), (Shown{false, false}));
  EXPECT_EQ(at.shown_states({0, 1}), (Shown{true, true}));
  EXPECT_TRUE(at.foretold(0, {1, 2}));
  EXPECT_FALSE(at.foretold(0, {1}));
}

// A slow coupling is a coupling: a basin fills in hours, with states of unlike size.
const char* const kBasin = R"(
rig: basin
response: 60 s
states:
  level: {unit: m, start: 2, start_sd: 2}
  inflow: {unit: m3/s, start: 0.1, start_sd: 0.2}
motion: {level: inflow / 120}
unrest: {inflow: 0.002}
channels:
  sonic: {reads: level, sd: 0.004, range: [0, 6]}
)";

TEST(Linearised, ASlowCouplingCounts) {
  const auto rig = load(kBasin);
  ASSERT_TRUE(rig);
  const Linearised at(*rig->model, start_of(*rig->model));
  EXPECT_EQ(at.shown_states({0}), (Shown{true, true}));
}

// A distance has no slope at its own foot, and is flat across: the point beside the start shows more.
const char* const kDistance = R"(
rig: distance
response: 1 s
states:
  east: {unit: m, start: 3, start_sd: 5}
  north: {unit: m, start: 0, start_sd: 5}
channels:
  first: {reads: sqrt(east^2 + north^2), unit: m, sd: 0.1, range: [0, 100]}
  second: {reads: sqrt((east - 10)^2 + north^2), unit: m, sd: 0.1, range: [0, 100]}
)";

TEST(Linearised, ANonlinearMachineMayShowMoreBesideTheStart) {
  const auto rig = load(kDistance);
  ASSERT_TRUE(rig);
  const Linearised at(*rig->model, start_of(*rig->model));
  EXPECT_EQ(at.shown_states({0, 1}), (Shown{true, false}));
  const Linearised beside(*rig->model, near_start_of(*rig->model));
  EXPECT_EQ(beside.shown_states({0, 1}), (Shown{true, true}));
}

// A pump's wear shows only while it runs.
const char* const kWear = R"(
rig: wear
response: 1 s
states:
  level: {unit: m, start: 1, start_sd: 1}
  wear: {unit: "1", start: 0, start_sd: 0.1}
inputs:
  pump: {unit: m3/s, start: 0, range: [0, 0.1]}
motion: {level: -pump * (1 - wear)}
channels:
  sonic: {reads: level, sd: 0.01, range: [0, 6]}
)";

TEST(Linearised, WhatAnInputBringsToLightShowsWhileItIsAtWork) {
  const auto rig = load(kWear);
  ASSERT_TRUE(rig);
  EXPECT_EQ(Linearised(*rig->model, start_of(*rig->model)).shown_states({0}), (Shown{true, false}));
  EXPECT_EQ(Linearised(*rig->model, near_start_of(*rig->model)).shown_states({0}), (Shown{true, true}));
}

TEST(Linearised, APointWithoutASlopeTellsNothing) {
  std::string text = kDistance;
  text.replace(text.find("start: 3"), 8, "start: 0");
  const auto rig = load(text);
  ASSERT_TRUE(rig);
  const Linearised at(*rig->model, start_of(*rig->model));
  EXPECT_EQ(at.shown_states({0}), (Shown{false, false}));
}

}  // namespace
}  // namespace steelyard::client
