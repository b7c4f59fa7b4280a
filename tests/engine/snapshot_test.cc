// SPDX-License-Identifier: Apache-2.0
// An engine is a value: copies are snapshots, and asking for estimates leaves no trace.
#include <gtest/gtest.h>

#include "engine/axis.h"

namespace steelyard::engine {
namespace {

constexpr std::uint64_t kSeed = 3;
constexpr int kSnapshot = 1100;  // two seconds into the faults
constexpr int kEnd = 1400;

std::vector<double> outcome(Engine& engine) {
  Estimate e;
  engine.estimate(axis_time(kEnd), Detail::kFull, e);
  auto out = numbers(e);
  out.push_back(engine.log_evidence());
  return out;
}

Engine run_to(const suite::Readings& readings, int end) {
  Engine engine(suite::axis_model({}, double_fault()));
  for (int step = 0; step < end; ++step) read_moment(engine, readings, step);
  return engine;
}

TEST(Snapshot, CopiesGoOnWithTheSameBits) {
  const auto readings = axis_readings(kSeed);
  Engine engine = run_to(readings, kSnapshot);
  Engine copy(engine);
  Engine assigned(suite::axis_model({}, double_fault()));
  assigned = engine;
  Engine straight = run_to(readings, kEnd);
  for (int step = kSnapshot; step < kEnd; ++step) read_moment(engine, readings, step);
  for (int step = kSnapshot; step < kEnd; ++step) read_moment(copy, readings, step);
  for (int step = kSnapshot; step < kEnd; ++step) read_moment(assigned, readings, step);
  const auto expected = outcome(straight);
  EXPECT_TRUE(same_bits(outcome(engine), expected));
  EXPECT_TRUE(same_bits(outcome(copy), expected));
  EXPECT_TRUE(same_bits(outcome(assigned), expected));
}

TEST(Snapshot, CopyIsNotMovedByTheOriginal) {
  const auto readings = axis_readings(kSeed);
  Engine engine = run_to(readings, kSnapshot);
  Engine copy(engine);
  Engine untouched = run_to(readings, kSnapshot);
  for (int step = kSnapshot; step < kEnd; ++step) read_moment(engine, readings, step);
  EXPECT_TRUE(same_bits(outcome(copy), outcome(untouched)));
}

TEST(Snapshot, EstimatesLeaveNoTrace) {
  const auto readings = axis_readings(kSeed);
  Engine quiet = run_to(readings, kEnd);
  Engine asked(suite::axis_model({}, double_fault()));
  Estimate e;
  for (int step = 0; step < kEnd; ++step) {
    read_moment(asked, readings, step);
    asked.estimate(axis_time(step), Detail::kFull, e);
    asked.estimate(axis_time(step) + 7'000'000, Detail::kBrief, e);
    if (step % 50 == 0) asked.estimate(axis_time(step) + 3'000'000'000, Detail::kFull, e);
  }
  EXPECT_TRUE(same_bits(outcome(asked), outcome(quiet)));
}

// The comparison can fail: one reading that differs in its last digit shows.
TEST(Snapshot, ComparisonSeesTheLastDigit) {
  auto readings = axis_readings(kSeed);
  Engine one = run_to(readings, kEnd);
  double& value = readings.value[2][kEnd - 1];
  value = std::nextafter(value, 10.0);
  Engine other = run_to(readings, kEnd);
  EXPECT_FALSE(same_bits(outcome(one), outcome(other)));
}

}  // namespace
}  // namespace steelyard::engine
