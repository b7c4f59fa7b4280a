// SPDX-License-Identifier: Apache-2.0
// Watch: the present picture at once, pace, conflation, every moment.
#include <chrono>
#include <cmath>
#include <limits>
#include <thread>

#include "fixture.h"
#include "rig/rig.h"
#include "timeline/timeline.h"

namespace steelyard::service {
namespace {

using grpc::StatusCode;

class WatchTest : public ServiceTest {
 protected:
  void SetUp() override {
    ServiceTest::SetUp();
    ASSERT_TRUE(put(trolley()).ok());
  }
  void feed_rows(const Ramp& ramp, const std::string& rig = "trolley") {
    FeedCall feed(*stub_, rig, "plc", {"left", "right"});
    feed.send(batch(ramp));
    feed.until_taken(ramp.first_sequence + static_cast<std::uint64_t>(ramp.rows) - 1);
    EXPECT_TRUE(feed.close().ok());
  }
  /// For a reader that is to be slow: little fits into the network.
  std::unique_ptr<v1::Steelyard::Stub> narrow_stub() {
    grpc::ChannelArguments arguments;
    arguments.SetInt(GRPC_ARG_HTTP2_BDP_PROBE, 0);
    arguments.SetInt(GRPC_ARG_HTTP2_STREAM_LOOKAHEAD_BYTES, 1024);
    return new_stub(arguments);
  }
};

TEST_F(WatchTest, PresentPictureComesAtOnce) {
  WatchCall early(*stub_, watch_request("trolley"));
  v1::WatchResponse update = early.next();
  EXPECT_EQ(update.beat(), 1U);
  EXPECT_EQ(update.missed(), 0U);
  EXPECT_FALSE(update.moment().started());
  EXPECT_EQ(update.moment().quality(), v1::ESTIMATE_BAD);
  EXPECT_EQ(update.moment().channels(0).age_s(), -1.0);

  feed_rows({.rows = 20});
  WatchCall late(*stub_, watch_request("trolley"));
  update = late.next();
  EXPECT_EQ(update.beat(), 1U);
  EXPECT_TRUE(update.moment().started());
  EXPECT_EQ(update.moment().clock_ns(), kStart + 19 * kSecond / 10);
}

TEST_F(WatchTest, UpdateCarriesTheWholePicture) {
  feed_rows({.rows = 50});
  WatchCall watch(*stub_, watch_request("trolley"));
  const v1::Moment moment = watch.next().moment();
  EXPECT_EQ(moment.rig(), "trolley");
  EXPECT_EQ(moment.quality(), v1::ESTIMATE_GOOD);
  EXPECT_FALSE(moment.revised());
  ASSERT_EQ(moment.states_size(), 2);
  EXPECT_EQ(moment.states(0).name(), "position");
  EXPECT_EQ(moment.states(1).unit(), "m/s");
  EXPECT_LT(moment.states(0).interval90().low(), moment.states(0).mean());
  EXPECT_GT(moment.states(0).interval90().high(), moment.states(0).mean());
  EXPECT_GT(moment.states(0).within_needs(), 0.95);
  ASSERT_EQ(moment.channels_size(), 2);
  const v1::ChannelEstimate& left = moment.channels(0);
  ASSERT_EQ(left.probability_size(), 6);
  double sum = 0.0;
  for (const double probability : left.probability()) sum += probability;
  EXPECT_NEAR(sum, 1.0, 1e-9);
  EXPECT_GT(left.trust(), 0.5);
  EXPECT_GT(left.noise_sd(), 0.0);
  EXPECT_LT(left.noise_sd90().low(), left.noise_sd90().high());
  EXPECT_NEAR(left.influence(), 1.0, 1e-6);  // the other has said nothing
  EXPECT_EQ(left.age_s(), 0.0);
  EXPECT_EQ(left.status(), "good");
  EXPECT_NE(left.words().find("left"), std::string::npos);
  ASSERT_GE(moment.explanations_size(), 1);
  EXPECT_FALSE(moment.explanations(0).words().empty());
  EXPECT_EQ(moment.mode_size(), 4);
}

TEST_F(WatchTest, ChangeBringsAnUpdateAndQuietNone) {
  v1::WatchRequest request = watch_request("trolley");
  request.set_max_rate_hz(1000);
  WatchCall watch(*stub_, request);
  watch.next();
  std::this_thread::sleep_for(std::chrono::milliseconds(50));
  feed_rows({.rows = 1});
  const v1::WatchResponse update = watch.next();
  EXPECT_EQ(update.beat(), 2U);
  EXPECT_TRUE(update.moment().started());
}

TEST_F(WatchTest, MaxRateIsKeptAndTheLastStateComes) {
  v1::WatchRequest request = watch_request("trolley");
  request.set_max_rate_hz(10);
  WatchCall watch(*stub_, request);
  watch.next();
  const auto start = std::chrono::steady_clock::now();
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  constexpr int kReadings = 60;
  for (int i = 0; i < kReadings; ++i) {
    feed.send(batch(
        {.first_sequence = 1 + static_cast<std::uint64_t>(i), .start_ns = kStart + i * kSecond, .rows = 1}));
    std::this_thread::sleep_for(std::chrono::milliseconds(10));
  }
  int updates = 0;
  v1::WatchResponse update;
  do {
    update = watch.next();
    ++updates;
  } while (update.moment().clock_ns() < kStart + (kReadings - 1) * kSecond);
  const std::chrono::duration<double> took = std::chrono::steady_clock::now() - start;
  EXPECT_LE(updates, 10.0 * took.count() + 1.0);
  EXPECT_LT(updates, kReadings);
}

TEST_F(WatchTest, FixedRateBeatsOnAndStopsAtTheHorizon) {
  std::string text = trolley("short");
  text.replace(text.find("horizon: 10 s"), 13, "horizon: 300 ms");
  ASSERT_TRUE(put(text).ok());
  feed_rows({.rows = 20}, "short");
  const std::int64_t clock_ns = kStart + 19 * kSecond / 10;
  v1::WatchRequest request = watch_request("short");
  request.set_fixed_rate_hz(50);
  WatchCall watch(*stub_, request);
  std::int64_t before = 0;
  double before_sd = 0.0;
  bool extrapolated = false;
  v1::Moment last;
  for (std::uint64_t beat = 1; beat <= 40;) {  // 0.8 s
    const v1::WatchResponse update = watch.next();
    EXPECT_EQ(update.beat(), beat + update.missed());
    beat = update.beat() + 1;
    last = update.moment();
    EXPECT_EQ(last.clock_ns(), clock_ns);
    EXPECT_GE(last.time_ns(), std::max(before, clock_ns));
    EXPECT_LE(last.time_ns(), clock_ns + 3 * kSecond / 10);
    EXPECT_GE(last.states(0).sd(), before_sd);  // silence widens it
    extrapolated =
        extrapolated || (last.time_ns() > clock_ns && last.time_ns() < clock_ns + 3 * kSecond / 10);
    before = last.time_ns();
    before_sd = last.states(0).sd();
  }
  EXPECT_TRUE(extrapolated);
  EXPECT_EQ(last.time_ns(), clock_ns + 3 * kSecond / 10);
  EXPECT_EQ(last.quality(), v1::ESTIMATE_BAD);
}

TEST_F(WatchTest, SlowReaderGetsTheNewestAndIsToldWhatItMissed) {
  feed_rows({.rows = 20});
  const auto narrow = narrow_stub();
  v1::WatchRequest request = watch_request("trolley");
  request.set_fixed_rate_hz(1000);
  WatchCall watch(*narrow, request);
  std::uint64_t beat = watch.next().beat();
  std::this_thread::sleep_for(std::chrono::seconds(2));
  std::uint64_t missed = 0;
  for (int i = 0; i < 2000 && missed <= 10; ++i) {
    const v1::WatchResponse update = watch.next();
    EXPECT_EQ(update.beat(), beat + 1 + update.missed());
    beat = update.beat();
    missed += update.missed();
  }
  EXPECT_GT(missed, 10U);
}

TEST_F(WatchTest, EveryMomentMissesNoneThoughTheReaderIsSlow) {
  constexpr int kMoments = 2500;  // more than may wait
  const auto narrow = narrow_stub();
  v1::WatchRequest request = watch_request("trolley");
  request.set_every_moment(true);
  WatchCall watch(*narrow, request);
  EXPECT_FALSE(watch.next().moment().started());
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  feed.send(batch({.rows = kMoments, .step = 0.0}));
  std::this_thread::sleep_for(std::chrono::seconds(1));
  for (int i = 0; i < kMoments; ++i) {
    const v1::WatchResponse update = watch.next();
    ASSERT_EQ(update.missed(), 0U);
    ASSERT_EQ(update.moment().time_ns(), kStart + i * kSecond / 10);
  }
  feed.until_taken(kMoments);
}

TEST_F(WatchTest, ReaderOfEveryMomentThatGoesAwayFreesTheRig) {
  constexpr int kMoments = 2500;
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  {
    const auto narrow = narrow_stub();
    v1::WatchRequest request = watch_request("trolley");
    request.set_every_moment(true);
    WatchCall watch(*narrow, request);
    watch.next();
    feed.send(batch({.rows = kMoments, .step = 0.0}));
    std::this_thread::sleep_for(std::chrono::milliseconds(300));
  }
  feed.until_taken(kMoments);
}

/// The service gives the numbers of a timeline that is fed directly, bit by bit.
TEST_F(WatchTest, EveryMomentHasTheNumbersOfTheTimeline) {
  const v1::Batch rows = batch({.rows = 400, .value = 0.5, .step = 0.003});
  v1::WatchRequest request = watch_request("trolley");
  request.set_every_moment(true);
  WatchCall watch(*stub_, request);
  watch.next();
  FeedCall feed(*stub_, "trolley", "plc", {"left", "right"});
  v1::Batch both = rows;
  for (int i = 0; i < 400; i += 2) both.set_channel(i, 1);
  for (int i = 1; i < 400; i += 4) both.set_time_step_ns(i, 0);  // times that both read
  feed.send(both);

  const auto loaded = rig::load(trolley(), "test.yaml");
  ASSERT_TRUE(loaded.rig);
  timeline::Timeline direct(loaded.rig);
  std::vector<timeline::Reading> readings;
  std::int64_t time_ns = both.base_time_ns();
  for (int i = 0; i < 400; ++i) {
    time_ns += both.time_step_ns(i);
    readings.push_back({time_ns, *loaded.rig->find(i % 2 == 0 ? "right" : "left"), both.value(i),
                        engine::Quality::kGood, direct.source_number("plc"),
                        static_cast<std::uint64_t>(i + 1)});
  }
  int moments = 0;
  std::vector<timeline::Outcome> outcomes;
  engine::Estimate expected;
  direct.run(readings, outcomes, [&](engine::TimeNs at) {
    direct.estimate(at, engine::Detail::kFull, expected);
    const v1::Moment moment = watch.next().moment();
    ++moments;
    ASSERT_EQ(moment.time_ns(), at);
    for (int i = 0; i < 2; ++i) {
      const auto index = static_cast<std::size_t>(i);
      ASSERT_EQ(moment.states(i).mean(), expected.states[index].mean);
      ASSERT_EQ(moment.states(i).sd(), expected.states[index].sd);
      ASSERT_EQ(moment.channels(i).trust(), expected.channels[index].trust);
      ASSERT_EQ(moment.channels(i).noise_sd(), expected.channels[index].noise_sd);
    }
  });
  EXPECT_EQ(moments, 300);
}

TEST_F(WatchTest, RequestsAreChecked) {
  v1::WatchRequest request = watch_request("nobody");
  EXPECT_TRUE(is_status(WatchCall(*stub_, request).status(), StatusCode::NOT_FOUND, "\"nobody\""));
  request = watch_request("trolley");
  for (const double rate : {-1.0, 1001.0, std::numeric_limits<double>::quiet_NaN()}) {
    request.set_max_rate_hz(rate);
    EXPECT_TRUE(is_status(WatchCall(*stub_, request).status(), StatusCode::INVALID_ARGUMENT, "max_rate_hz:"));
  }
  request.set_max_rate_hz(1);
  request.set_every_moment(true);
  EXPECT_TRUE(is_status(WatchCall(*stub_, request).status(), StatusCode::INVALID_ARGUMENT, "at most one"));
}

TEST_F(WatchTest, TooManyWatchesAreRefused) {
  ServerOptions options;
  options.limits.watches_per_rig = 1;
  start(options);
  ASSERT_TRUE(put(trolley()).ok());
  WatchCall first(*stub_, watch_request("trolley"));
  first.next();
  EXPECT_TRUE(is_status(WatchCall(*stub_, watch_request("trolley")).status(), StatusCode::RESOURCE_EXHAUSTED,
                        "1 watches"));
}

}  // namespace
}  // namespace steelyard::service
