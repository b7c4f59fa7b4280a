// SPDX-License-Identifier: Apache-2.0
// A slow rig: its mailbox fills, its feeds are held up, nothing is dropped, nobody else waits.
#include <atomic>
#include <chrono>
#include <thread>

#include "fixture.h"

namespace steelyard::service {
namespace {

constexpr int kRows = 20'000;
constexpr int kBatches = 60;  // some 200 KB each: far more than the network holds

class MailboxTest : public ServiceTest {
 protected:
  void SetUp() override {
    ServerOptions options;
    options.limits.mailbox_readings = 2 * kRows;
    start(options);
    ASSERT_TRUE(put(trolley()).ok());
  }
};

constexpr std::uint64_t kHigh = 1'000'000'000;

/// Rows that cost the rig next to nothing, so that what is tested is the way to it: after number kHigh all of
/// them are repeats, which are counted.
v1::Batch repeats(int number) {
  return batch({.first_sequence = 1 + static_cast<std::uint64_t>(number) * kRows,
                .start_ns = kStart,
                .step_ns = 0,
                .rows = kRows});
}

TEST_F(MailboxTest, FullMailboxHoldsTheSourceUpAndDropsNothing) {
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  feed.answer();
  clock_.close_gate();
  feed.send(batch({.first_sequence = kHigh, .rows = 1}));  // the worker stops at its time
  clock_.wait_for_visitor();

  std::atomic<int> sent{0};
  std::thread source([&] {
    for (int i = 0; i < kBatches; ++i) {
      feed.send(repeats(i));
      ++sent;
    }
  });
  // Wait until the source gets no further.
  int before = -1;
  while (sent != before) {
    before = sent;
    std::this_thread::sleep_for(std::chrono::milliseconds(500));
  }
  EXPECT_LT(sent, kBatches) << "nothing held the source up";

  clock_.open_gate();
  source.join();
  v1::FeedResponse answer;
  while (answer.repeated_total() < static_cast<std::uint64_t>(kBatches) * kRows) answer = feed.answer();
  EXPECT_EQ(answer.repeated_total(), static_cast<std::uint64_t>(kBatches) * kRows);
  EXPECT_EQ(answer.refused_total(), 0U);
  EXPECT_TRUE(feed.close().ok());
}

TEST_F(MailboxTest, QuestionsDoNotWaitBehindReadings) {
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  feed.answer();
  feed.send(batch({.step_ns = kSecond / 100, .rows = 2000}));
  v1::Moment moment;
  do {
    EXPECT_TRUE(estimate("trolley", moment).ok());
  } while (!moment.started());
  EXPECT_LT(moment.clock_ns(), kStart + 1999 * kSecond / 100) << "the answer waited for all readings";
  feed.until_taken(2000);
}

TEST_F(MailboxTest, SlowRigDoesNotHoldUpAnother) {
  ServerOptions options;
  options.threads = 2;
  start(options);
  ASSERT_TRUE(put(trolley()).ok());
  ASSERT_TRUE(put(trolley("other")).ok());
  FeedCall slow(*stub_, "trolley", "plc", {"left"});
  slow.answer();
  clock_.close_gate();
  slow.send(batch({.rows = 1}));
  clock_.wait_for_visitor();
  FeedCall other(*stub_, "other", "plc", {"left"});
  EXPECT_TRUE(other.answer().has_opened());
  clock_.open_gate();
  slow.until_taken(1);
}

}  // namespace
}  // namespace steelyard::service
