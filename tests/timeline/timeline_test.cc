// SPDX-License-Identifier: Apache-2.0
#include "timeline/timeline.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <random>

namespace steelyard::timeline {
namespace {

using engine::Detail;
using engine::Estimate;
using engine::Quality;
using engine::TimeNs;

constexpr TimeNs kSecond = 1'000'000'000;

constexpr const char* kTank = R"(
rig: tank
response: 10 s
states:
  level: {unit: m, start: 1, start_sd: 1}
inputs:
  pump: {unit: m/s, start: 0, sd: 0.001, range: [-1, 1], period: 3 s}
motion: {level: pump}
unrest: {level: 0.01}
channels:
  left:  {reads: level, sd: 0.02, range: [0, 10], period: 1 s}
  right: {reads: level, sd: 0.03, range: [0, 10], period: 1 s, signal: 4-20 mA}
)";

std::shared_ptr<const rig::Rig> load(const std::string& text) {
  const auto loaded = rig::load(text, "test.yaml");
  for (const auto& p : loaded.problems) ADD_FAILURE() << p.text();
  return loaded.rig;
}

class Feeder {
 public:
  explicit Feeder(const std::string& text = kTank)
      : timeline(load(text)), source_(timeline.source_number("plc")) {}

  Reading make(const char* signal, double t_s, double value) {
    Reading r;
    r.signal = *timeline.rig().find(signal);
    r.time_ns = static_cast<TimeNs>(std::llround(t_s * 1e9));
    r.values = value;
    r.source = source_;
    r.sequence = ++sequence_;
    return r;
  }
  Outcome send(Reading r) {
    std::vector<Outcome> outcomes;
    timeline.run({&r, 1}, outcomes);
    return outcomes.front();
  }
  Outcome send(const char* signal, double t_s, double value) { return send(make(signal, t_s, value)); }

  Timeline timeline;

 private:
  std::uint32_t source_;
  std::uint64_t sequence_ = 0;
};

TEST(Timeline, AnyOrderWithinOneCallGivesTheSameBits) {
  Feeder sorted;
  std::vector<Reading> log;
  for (int i = 0; i < 60; ++i) {
    log.push_back(sorted.make("pump", 100 + i, 0.01 * (i % 3)));
    log.push_back(sorted.make("left", 100 + i, 1.0 + 0.01 * ((i * 7) % 5)));
    log.push_back(sorted.make("right", 100 + i, 1.0 + 0.01 * ((i * 3) % 7)));
  }
  std::vector<Reading> batch = log;
  std::vector<Outcome> outcomes;
  sorted.timeline.run(batch, outcomes);
  Estimate expected;
  sorted.timeline.estimate(sorted.timeline.clock(), Detail::kBrief, expected);
  for (unsigned seed = 1; seed <= 10; ++seed) {
    SCOPED_TRACE(seed);
    Feeder other;
    batch = log;
    std::mt19937 random(seed);
    std::shuffle(batch.begin(), batch.end(), random);
    other.timeline.run(batch, outcomes);
    Estimate got;
    other.timeline.estimate(other.timeline.clock(), Detail::kBrief, got);
    EXPECT_EQ(got.states[0].mean, expected.states[0].mean);
    EXPECT_EQ(got.states[0].sd, expected.states[0].sd);
    EXPECT_EQ(got.channels[0].trust, expected.channels[0].trust);
  }
}

TEST(Timeline, InputsOfOneTimeGoBeforeChannels) {
  Feeder feeder;
  std::vector<Reading> batch{feeder.make("left", 5, 1.0), feeder.make("pump", 5, 0.1)};
  std::vector<Outcome> outcomes;
  feeder.timeline.run(batch, outcomes);
  EXPECT_TRUE(batch[0].signal.is_input);
  EXPECT_EQ(outcomes[0], Outcome::kInput);
  EXPECT_EQ(outcomes[1], Outcome::kFused);
}

TEST(Timeline, RecognisesWhatWasSentTwice) {
  Feeder feeder;
  const Reading r = feeder.make("left", 1, 1.0);
  EXPECT_EQ(feeder.send(r), Outcome::kFused);
  EXPECT_EQ(feeder.send(r), Outcome::kDuplicate);
  EXPECT_EQ(feeder.timeline.position(r.source), r.sequence);
}

TEST(Timeline, RefusesWhatIsOlderThanWhatWasFused) {
  Feeder feeder;
  feeder.send("left", 10, 1.0);
  EXPECT_EQ(feeder.send("right", 9, 1.0), Outcome::kTooOld);
  EXPECT_EQ(feeder.send("right", 10, 1.0), Outcome::kFused) << "an equal time is not older";
  EXPECT_EQ(feeder.timeline.clock(), 10 * kSecond);
}

constexpr const char* kPlane = R"(
rig: plane
response: 10 s
states:
  east:  {unit: m, start: 1, start_sd: 1}
  north: {unit: m, start: 2, start_sd: 1}
unrest: {east: 0.01, north: 0.01}
channels:
  fix: {reads: [east, north], sd: [0.1, 0.1], range: [[-9, 9], [-9, 9]], period: 1 s, delay: 2 s}
  tape: {reads: east, sd: 0.1, range: [-9, 9], period: 1 s}
)";

Values two(double first, double second) {
  Values values(first);
  EXPECT_TRUE(values.add(second));
  return values;
}

TEST(Timeline, AVectorReadingHasOneValueForEachPart) {
  constexpr double kNan = std::numeric_limits<double>::quiet_NaN();
  Feeder feeder(kPlane);
  Reading r = feeder.make("fix", 1, 0);
  r.values = two(1.0, 2.0);
  EXPECT_EQ(feeder.send(r), Outcome::kFused);
  EXPECT_EQ(feeder.send("fix", 2, 1.0), Outcome::kWrongParts);
  r = feeder.make("tape", 3, 0);
  r.values = two(1.0, 2.0);
  EXPECT_EQ(feeder.send(r), Outcome::kWrongParts);
  for (const Values& values : {two(1.0, kNan), two(kNan, 1.0)}) {
    r = feeder.make("fix", 3, 0);
    r.values = values;
    EXPECT_EQ(feeder.send(r), Outcome::kNotFinite);
  }
  r = feeder.make("fix", 4, 0);
  r.values = two(1.0, kNan);
  r.quality = Quality::kBad;
  EXPECT_EQ(feeder.send(r), Outcome::kNotUsable);
}

TEST(Timeline, ADelayedVectorReadingTellsOfItsPast) {
  Feeder feeder(kPlane);
  std::vector<Reading> batch{feeder.make("tape", 1, 1.0), feeder.make("fix", 4, 0),
                             feeder.make("tape", 3, 1.0)};
  batch[1].values = two(1.0, 2.0);
  std::vector<Outcome> outcomes;
  std::vector<TimeNs> moments;
  feeder.timeline.run(batch, outcomes, [&](TimeNs t) { moments.push_back(t); });
  EXPECT_EQ(moments, (std::vector<TimeNs>{kSecond, 2 * kSecond, 3 * kSecond}));
  EXPECT_EQ(batch[1].values.size(), 2U) << "sorted between the others";
  EXPECT_EQ(outcomes, std::vector<Outcome>(3, Outcome::kFused));
}

TEST(Values, HoldUpToTheirMost) {
  const std::vector<double> many(Values::kMost + 1, 3.0);
  Values values(many);
  EXPECT_EQ(values.size(), Values::kMost);
  EXPECT_FALSE(values.add(1.0));
  EXPECT_EQ(Values(many).all().back(), 3.0);
  EXPECT_EQ(Values(7.0).all().size(), 1U);
}

TEST(Timeline, RefusesNumbersThatAreNotFinite) {
  Feeder feeder;
  for (const double bad : {std::numeric_limits<double>::quiet_NaN(), std::numeric_limits<double>::infinity()})
    EXPECT_EQ(feeder.send("left", 1, bad), Outcome::kNotFinite);
  EXPECT_FALSE(feeder.timeline.started()) << "a refused reading moves no clock";
}

TEST(Timeline, AcceptsAnyNumberWithABadQuality) {
  Feeder feeder;
  Reading r = feeder.make("left", 1, std::numeric_limits<double>::quiet_NaN());
  r.quality = Quality::kBad;
  EXPECT_EQ(feeder.send(r), Outcome::kNotUsable);
}

// NAMUR NE 43 (limits from memory): 3.6 mA and 21 mA are -2.5 % and +106.25 % of the range.
TEST(Timeline, DecodesATransmittersFailureSignal) {
  Feeder feeder;
  EXPECT_EQ(feeder.send("right", 1, -0.26), Outcome::kNotUsable);
  EXPECT_EQ(feeder.send("right", 2, 10.63), Outcome::kNotUsable);
  EXPECT_EQ(feeder.send("right", 3, -0.24), Outcome::kOutOfRange);
  EXPECT_EQ(feeder.send("left", 4, -0.26), Outcome::kOutOfRange) << "not a 4-20 mA channel";
}

TEST(Timeline, ADelayedReadingTellsOfItsPast) {
  std::string text = kTank;
  text.replace(text.find("signal: 4-20 mA"), 15, "delay: 2 s");
  Feeder feeder(text);
  std::vector<Reading> batch{feeder.make("left", 1, 1.0), feeder.make("right", 4, 1.1),
                             feeder.make("left", 3, 1.2)};
  std::vector<Outcome> outcomes;
  std::vector<TimeNs> moments;
  feeder.timeline.run(batch, outcomes, [&](TimeNs t) { moments.push_back(t); });
  EXPECT_EQ(moments, (std::vector<TimeNs>{kSecond, 2 * kSecond, 3 * kSecond}));
  EXPECT_EQ(feeder.timeline.clock(), 4 * kSecond) << "the clock is of stamps";
}

TEST(Timeline, AMomentComesOnceForAllReadingsOfATime) {
  Feeder feeder;
  std::vector<Reading> batch{feeder.make("left", 1, 1.0), feeder.make("right", 1, 1.0),
                             feeder.make("pump", 2, 0.0), feeder.make("left", 3, 1.0)};
  std::vector<Outcome> outcomes;
  std::vector<TimeNs> moments;
  feeder.timeline.run(batch, outcomes, [&](TimeNs t) { moments.push_back(t); });
  EXPECT_EQ(moments, (std::vector<TimeNs>{kSecond, 3 * kSecond})) << "an input alone makes no moment";
}

// A held input becomes unknown when its period runs out: the estimate loses certainty faster from then on.
TEST(Timeline, AnOverdueInputIsNoLongerAFact) {
  Feeder known;
  Feeder lost;
  for (int i = 0; i < 10; ++i) {
    known.send("pump", i, 0.0);
    if (i == 0) lost.send("pump", i, 0.0);
    known.send("left", i, 1.0);
    lost.send("left", i, 1.0);
  }
  Estimate a;
  Estimate b;
  known.timeline.estimate(9 * kSecond, Detail::kBrief, a);
  lost.timeline.estimate(9 * kSecond, Detail::kBrief, b);
  EXPECT_GT(b.inputs_sd[0], 10 * a.inputs_sd[0]);
  EXPECT_GT(b.states[0].sd, a.states[0].sd);
}

}  // namespace
}  // namespace steelyard::timeline
