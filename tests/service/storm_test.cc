// SPDX-License-Identifier: Apache-2.0
// Everything at once from several threads: puts, removals, feeds, watches, estimates, callers that go away.
// Nothing may hang or die, and statuses are only those that the calls can have. Meant for the thread
// sanitizer.
#include <chrono>
#include <random>
#include <thread>

#include "fixture.h"

namespace steelyard::service {
namespace {

using grpc::StatusCode;

class StormTest : public ServiceTest {
 protected:
  void SetUp() override {
    ServerOptions options;
    options.threads = 2;
    options.limits.mailbox_readings = 30;
    options.limits.moments_waiting = 20;
    start(options);
  }

  void feed_some(std::mt19937& random, const std::string& rig, const std::string& source,
                 std::int64_t& time_ns) {
    FeedCall feed(*stub_, rig, source, {"left", "right"});
    for (std::uint64_t i = 0; i < 5; ++i) {
      feed.send(batch({.first_sequence = 1 + 10 * i, .start_ns = time_ns, .rows = 10}));
      time_ns += 2 * kSecond;
    }
    if (random() % 2 == 0) return;  // goes away
    const StatusCode code = feed.close().error_code();
    EXPECT_TRUE(code == StatusCode::OK || code == StatusCode::NOT_FOUND || code == StatusCode::ABORTED)
        << code;
  }

  void watch_some(std::mt19937& random, const std::string& rig) {
    v1::WatchRequest request = watch_request(rig);
    const auto kind = random() % 3;
    if (kind == 0) request.set_every_moment(true);
    if (kind == 1) request.set_fixed_rate_hz(500);
    WatchCall watch(*stub_, request);
    v1::WatchResponse update;
    for (int i = 0; i < 3 && kind == 1; ++i) watch.next(update);
    if (kind != 1) watch.next(update);
  }

  void act(std::mt19937& random, const std::string& source, std::int64_t& time_ns) {
    const std::string rig = random() % 2 == 0 ? "a" : "b";
    v1::Moment moment;
    switch (random() % 6) {
      case 0:
        EXPECT_TRUE(put(trolley(rig, "# " + std::to_string(random() % 3) + "\n")).ok());
        break;
      case 1:
        EXPECT_TRUE(put(trolley(rig, "  third: {reads: speed, sd: 0.1, range: [-5, 5]}\n")).ok());
        break;
      case 2:
        if (random() % 4 == 0) (void)remove(rig);
        break;
      case 3:
        feed_some(random, rig, source, time_ns);
        break;
      case 4:
        watch_some(random, rig);
        break;
      default:
        (void)estimate(rig, moment);
    }
  }
};

TEST_F(StormTest, NothingHangsOrDies) {
  constexpr unsigned kSeed = 20240607;
  SCOPED_TRACE("seed " + std::to_string(kSeed));
  clock_.set(kStart + 1'000'000 * kSecond);
  std::vector<std::thread> threads;
  for (unsigned t = 0; t < 4; ++t) {
    threads.emplace_back([this, t] {
      std::mt19937 random(kSeed + t);
      std::int64_t time_ns = kStart;
      for (int i = 0; i < 25; ++i) act(random, "source " + std::to_string(t % 3), time_ns);
    });
  }
  for (std::thread& thread : threads) thread.join();
  ASSERT_TRUE(put(trolley("a")).ok());  // still well
  v1::Moment moment;
  EXPECT_TRUE(estimate("a", moment).ok());
}

}  // namespace
}  // namespace steelyard::service
