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

/// Rows that cost the engine nothing, so that what is tested is the way to it.
v1::Batch cheap_batch(int number) {
  v1::Batch cheap = batch({.first_sequence = 1 + static_cast<std::uint64_t>(number) * kRows,
                           .start_ns = kStart + number,
                           .step_ns = 0,
                           .rows = kRows});
  for (int i = 0; i < kRows; ++i) {
    cheap.set_channel(i, 1);  // "nothing", which the rig does not have
  }
  return cheap;
}

TEST_F(MailboxTest, FullMailboxHoldsTheSourceUpAndDropsNothing) {
  FeedCall feed(*stub_, "trolley", "plc", {"left", "nothing"});
  feed.answer();
  clock_.close_gate();
  v1::Reading reading;  // the worker stops at its time
  reading.set_sequence(1);
  reading.set_time_ns(kStart);
  reading.set_value(1.0);
  feed.send(reading);
  clock_.wait_for_visitor();

  std::atomic<int> sent{0};
  std::thread source([&] {
    for (int i = 0; i < kBatches; ++i) {
      feed.send(cheap_batch(i));
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
  const v1::FeedResponse taken = feed.until_taken(static_cast<std::uint64_t>(kBatches) * kRows);
  source.join();
  // The first row repeats the single reading's number.
  EXPECT_EQ(taken.refused_total(), static_cast<std::uint64_t>(kBatches) * kRows - 1);
  EXPECT_EQ(taken.repeated_total(), 1U);
  EXPECT_TRUE(feed.close().ok());
}

TEST_F(MailboxTest, QuestionsDoNotWaitBehindReadings) {
  FeedCall feed(*stub_, "trolley", "plc", {"left", "nothing"});
  feed.answer();
  for (int i = 0; i < 3; ++i) feed.send(cheap_batch(i));
  v1::Moment moment;
  EXPECT_TRUE(estimate("trolley", moment).ok());
  feed.until_taken(3 * kRows);
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
