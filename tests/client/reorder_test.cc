// SPDX-License-Identifier: Apache-2.0
// The window in which a log's readings are put in order.
#include "lib/log/reorder.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <memory>
#include <random>
#include <vector>

namespace steelyard::client {
namespace {

using engine::TimeNs;
constexpr TimeNs kS = 1'000'000'000;

/// Two channels, the second with a delay, and an input.
rig::Rig make_rig(double horizon_s, double delay_s) {
  auto model = std::make_shared<engine::Model>();
  model->channels.resize(2);
  model->channels[1].delay_s = delay_s;
  model->inputs.resize(1);
  rig::Rig rig;
  rig.model = model;
  rig.horizon_s = horizon_s;
  return rig;
}

LogReading at(TimeNs time_s, int channel = 0) {
  return {time_s * kS, {false, channel}, 1.0, engine::Quality::kGood};
}

std::vector<TimeNs> times_s(const std::vector<timeline::Reading>& readings) {
  std::vector<TimeNs> times;
  for (const timeline::Reading& reading : readings) times.push_back(reading.time_ns / kS);
  return times;
}

TEST(Reorder, HoldsBackWhatMayBeOvertaken) {
  Reorder reorder(make_rig(10, 0));
  for (const TimeNs t : {3, 1, 2, 12}) EXPECT_TRUE(reorder.add(at(t)));
  std::vector<timeline::Reading> out;
  reorder.release(out);
  EXPECT_EQ(times_s(out), (std::vector<TimeNs>{1}));  // 2 = 12 − 10 may still get company
  EXPECT_TRUE(reorder.add(at(2)));
  reorder.release_rest(out);
  EXPECT_EQ(times_s(out), (std::vector<TimeNs>{1, 2, 2, 3, 12}));
}

TEST(Reorder, RefusesWhatIsOlderThanTheHorizon) {
  Reorder reorder(make_rig(10, 0));
  EXPECT_TRUE(reorder.add(at(100)));
  EXPECT_TRUE(reorder.add(at(90)));
  EXPECT_FALSE(reorder.add(at(89)));
  EXPECT_DOUBLE_EQ(reorder.behind_s(at(89)), 11.0);
}

TEST(Reorder, OrdersByTimeLessDelay) {
  Reorder reorder(make_rig(10, 5));
  EXPECT_TRUE(reorder.add(at(4, 0)));
  EXPECT_TRUE(reorder.add(at(7, 1)));  // tells of 2
  std::vector<timeline::Reading> out;
  reorder.release_rest(out);
  EXPECT_EQ(times_s(out), (std::vector<TimeNs>{7, 4}));
}

TEST(Reorder, SequencesRiseInTheOrderOfRelease) {
  Reorder reorder(make_rig(10, 0));
  for (const TimeNs t : {5, 4, 6}) ASSERT_TRUE(reorder.add(at(t)));
  std::vector<timeline::Reading> out;
  reorder.release_rest(out);
  for (std::size_t i = 0; i < out.size(); ++i) EXPECT_EQ(out[i].sequence, i + 1);
}

TEST(Reorder, KeepsTheOrderOfArrivalWithinOneTime) {
  Reorder reorder(make_rig(10, 0));
  for (int i = 0; i < 20; ++i) {
    LogReading reading = at(1);
    reading.values = i;
    ASSERT_TRUE(reorder.add(reading));
  }
  std::vector<timeline::Reading> out;
  reorder.release_rest(out);
  for (int i = 0; i < 20; ++i) {
    EXPECT_EQ(out[static_cast<std::size_t>(i)].values.first(), i);
  }
}

TEST(Reorder, ValuesOfAllPartsStayTogether) {
  rig::Rig rig = make_rig(3, 0);
  auto model = std::make_shared<engine::Model>(*rig.model);
  model->channels[1].others.resize(2);
  rig.model = model;
  Reorder reorder(rig);
  std::vector<timeline::Reading> out;
  for (int i = 0; i < 40; ++i) {  // slots are used again meanwhile
    LogReading reading = at((i * 7) % 3 + i, i % 2);
    reading.values = static_cast<double>(reading.time_ns / kS);
    if (i % 2 == 1) {
      reading.values.add(static_cast<double>(i));
      reading.values.add(static_cast<double>(-i));
    }
    ASSERT_TRUE(reorder.add(reading)) << i;
    reorder.release(out);
  }
  reorder.release_rest(out);
  ASSERT_EQ(out.size(), 40U);
  for (const timeline::Reading& reading : out) {
    const auto all = reading.values.all();
    ASSERT_EQ(all.size(), reading.signal.index == 1 ? 3U : 1U);
    EXPECT_EQ(all[0], static_cast<double>(reading.time_ns / kS));
    if (all.size() == 3) {
      EXPECT_EQ(all[1], -all[2]);
    }
  }
}

// A log that ends, or leaps ahead, gives what waits in pieces, whole times only.
TEST(Reorder, GivesMuchInPiecesOfWholeTimes) {
  constexpr auto kReadings = static_cast<int>(Reorder::kMostAtOnce) + 1000;
  for (const bool leap : {false, true}) {
    Reorder reorder(make_rig(1e6, 0));
    for (int i = 0; i < kReadings; ++i) ASSERT_TRUE(reorder.add(at(i / 10)));
    if (leap) {
      ASSERT_TRUE(reorder.add(at(100'000'000)));
    }
    std::vector<timeline::Reading> first;
    std::vector<timeline::Reading> second;
    leap ? reorder.release(first) : reorder.release_rest(first);
    leap ? reorder.release(second) : reorder.release_rest(second);
    EXPECT_GE(first.size(), Reorder::kMostAtOnce);
    EXPECT_LT(first.size(), Reorder::kMostAtOnce + 10);
    EXPECT_EQ(first.size() + second.size(), static_cast<std::size_t>(kReadings));
    EXPECT_LT(first.back().time_ns, second.front().time_ns);
    EXPECT_EQ(second.back().sequence, static_cast<std::uint64_t>(kReadings));
  }
}

TEST(Reorder, MemoryIsBounded) {
  constexpr std::size_t kMost = 100;
  Reorder reorder(make_rig(1e6, 0), kMost);
  std::vector<timeline::Reading> out;
  for (int i = 0; i < 150; ++i) ASSERT_TRUE(reorder.add(at(1000 + i)));
  reorder.release(out);
  EXPECT_EQ(out.size(), 50U);
  EXPECT_FALSE(reorder.add(at(1000)));  // its time is out
  EXPECT_TRUE(reorder.add(at(1050)));
}

TEST(Reorder, MemoryIsBoundedWhenAllTimesAreOne) {
  Reorder reorder(make_rig(1e6, 0), 100);
  std::vector<timeline::Reading> out;
  for (int i = 0; i < 150; ++i) ASSERT_TRUE(reorder.add(at(7)));
  reorder.release(out);
  EXPECT_EQ(out.size(), 150U);
}

TEST(Reorder, ExtremeTimesDoNotWrap) {
  Reorder reorder(make_rig(1e12, 1e12));
  LogReading first = at(0);
  first.time_ns = std::numeric_limits<TimeNs>::min();
  LogReading second = at(0, 1);
  second.time_ns = std::numeric_limits<TimeNs>::max();
  EXPECT_TRUE(reorder.add(first));
  EXPECT_TRUE(reorder.add(second));
  std::vector<timeline::Reading> out;
  reorder.release(out);
  reorder.release_rest(out);
  EXPECT_EQ(out.size(), 2U);
}

// Against the obvious: sort everything, when the shuffle stays within the horizon.
TEST(Reorder, ShuffledWithinTheHorizonEqualsSorted) {
  for (unsigned seed = 1; seed <= 50; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    std::mt19937 random(seed);
    std::vector<std::pair<TimeNs, TimeNs>> arrivals;  // when it comes, when it is of
    for (TimeNs t = 0; t < 500; ++t) arrivals.emplace_back(t + static_cast<TimeNs>(random() % 20), t);
    std::sort(arrivals.begin(), arrivals.end());
    Reorder reorder(make_rig(20, 0));
    std::vector<timeline::Reading> out;
    for (const auto& [when, t] : arrivals) {
      ASSERT_TRUE(reorder.add(at(t)));
      if (random() % 7 == 0) reorder.release(out);
    }
    reorder.release_rest(out);
    ASSERT_EQ(out.size(), 500U);
    for (std::size_t i = 0; i < out.size(); ++i) ASSERT_EQ(out[i].time_ns, static_cast<TimeNs>(i) * kS);
  }
}

}  // namespace
}  // namespace steelyard::client
