// SPDX-License-Identifier: Apache-2.0
// Feed: positions, refusals, malformed messages, takeovers.
#include <limits>
#include <thread>

#include "fixture.h"

namespace steelyard::service {
namespace {

using grpc::StatusCode;

class FeedTest : public ServiceTest {
 protected:
  void SetUp() override {
    ServiceTest::SetUp();
    ASSERT_TRUE(put(trolley()).ok());
  }
  /// What a feed with this one message ends with.
  grpc::Status status_of(const v1::Batch& wrong) {
    FeedCall feed(*stub_, "trolley", "plc", {"left"});
    feed.answer();
    feed.send(wrong);
    return feed.status();
  }
};

TEST_F(FeedTest, ReadingsMoveTheEstimate) {
  FeedCall feed(*stub_, "trolley", "plc", {"left", "right"});
  const v1::FeedResponse opened = feed.answer();
  EXPECT_TRUE(opened.has_opened());
  EXPECT_EQ(opened.opened().next_sequence(), 1U);
  EXPECT_EQ(opened.opened().unknown_channels_size(), 0);
  feed.send(batch({.rows = 50, .value = 3.0, .step = 0.0002}));
  const v1::FeedResponse taken = feed.until_taken(50);
  EXPECT_EQ(taken.kept(), 0U);
  EXPECT_EQ(taken.refused_total(), 0U);
  v1::Moment moment;
  ASSERT_TRUE(estimate("trolley", moment).ok());
  EXPECT_EQ(moment.time_ns(), kStart + 49 * kSecond / 10);
  EXPECT_NEAR(moment.states(0).mean(), 3.0, 0.05);
  EXPECT_GT(moment.channels(0).trust(), 0.5);
  EXPECT_EQ(moment.behind_ns(), kStart + 1000 * kSecond - moment.time_ns());
  EXPECT_TRUE(feed.close().ok());
}

TEST_F(FeedTest, SingleReadingsAndInputsAreTaken) {
  FeedCall feed(*stub_, "trolley", "plc", {"push", "left"});
  v1::Reading reading;
  reading.set_sequence(1);
  reading.set_time_ns(kStart);
  reading.set_channel(0);
  reading.set_value(0.25);
  feed.send(reading);
  reading.set_sequence(2);
  reading.set_channel(1);
  reading.set_value(1.0);
  feed.send(reading);
  feed.until_taken(2);
  v1::Moment moment;
  ASSERT_TRUE(estimate("trolley", moment).ok());
  EXPECT_DOUBLE_EQ(moment.inputs(0).value(), 0.25);
  EXPECT_NEAR(moment.states(0).mean(), 1.0, 0.05);
}

TEST_F(FeedTest, WhatIsSentAgainIsRecognised) {
  v1::Moment once;
  {
    FeedCall feed(*stub_, "trolley", "plc", {"left"});
    feed.send(batch({.rows = 10}));
    feed.until_taken(10);
    ASSERT_TRUE(estimate("trolley", once).ok());
    feed.send(batch({.rows = 10}));
    feed.send(batch({.first_sequence = 8, .start_ns = kStart + 7 * kSecond / 10, .rows = 3}));
    ASSERT_TRUE(feed.close().ok());
  }
  v1::Moment again;
  ASSERT_TRUE(estimate("trolley", again).ok());
  EXPECT_EQ(again.states(0).mean(), once.states(0).mean());
  EXPECT_EQ(again.states(0).sd(), once.states(0).sd());

  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  EXPECT_EQ(feed.answer().opened().next_sequence(), 11U);
  feed.send(batch({.first_sequence = 6, .start_ns = kStart + kSecond / 2, .rows = 10}));
  const v1::FeedResponse taken = feed.until_taken(15);
  EXPECT_EQ(taken.repeated_total(), 5U);
  EXPECT_EQ(taken.refused_total(), 0U);
  FeedCall other(*stub_, "trolley", "another plc", {"left"});
  EXPECT_EQ(other.answer().opened().next_sequence(), 1U);
}

TEST_F(FeedTest, UnknownChannelIsReportedAndRefusedAndStopsNothing) {
  FeedCall feed(*stub_, "trolley", "plc", {"left", "middle"});
  const v1::FeedResponse opened = feed.answer();
  ASSERT_EQ(opened.opened().unknown_channels_size(), 1);
  EXPECT_EQ(opened.opened().unknown_channels(0), "middle");
  v1::Batch mixed = batch({.rows = 4});
  mixed.set_channel(1, 1);
  mixed.set_channel(2, 2);  // beyond the table
  feed.send(mixed);
  const v1::FeedResponse taken = feed.until_taken(4);
  ASSERT_EQ(taken.refused_size(), 2);
  EXPECT_EQ(taken.refused(0).sequence(), 2U);
  EXPECT_EQ(taken.refused(0).reason(), v1::UNKNOWN_CHANNEL);
  EXPECT_EQ(taken.refused(0).message(), "middle: is no channel or input of rig trolley");
  EXPECT_EQ(taken.refused(1).reason(), v1::UNKNOWN_CHANNEL);
  EXPECT_NE(taken.refused(1).message().find("channel: is 2"), std::string::npos);
  v1::Moment moment;
  ASSERT_TRUE(estimate("trolley", moment).ok());
  EXPECT_NEAR(moment.states(0).mean(), 1.0, 0.05);  // the good ones beside them
}

TEST_F(FeedTest, NotFiniteIsRefusedUnlessCalledBad) {
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  v1::Batch wrong = batch({.rows = 5});
  wrong.set_value(1, std::numeric_limits<double>::quiet_NaN());
  wrong.set_value(2, std::numeric_limits<double>::infinity());
  wrong.set_value(3, std::numeric_limits<double>::quiet_NaN());
  wrong.add_quality_row(3);
  wrong.add_quality(v1::BAD);
  feed.send(wrong);
  const v1::FeedResponse taken = feed.until_taken(5);
  ASSERT_EQ(taken.refused_size(), 2);
  EXPECT_EQ(taken.refused(0).reason(), v1::NOT_FINITE);
  EXPECT_EQ(taken.refused(0).message(), "left: value is nan; must be finite");
  EXPECT_EQ(taken.refused(1).sequence(), 3U);
  v1::Moment moment;
  ASSERT_TRUE(estimate("trolley", moment).ok());
  EXPECT_NEAR(moment.states(0).mean(), 1.0, 0.05);
}

TEST_F(FeedTest, UnknownQualityIsRefused) {
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  v1::Batch wrong = batch({.rows = 2});
  wrong.add_quality_row(1);
  wrong.add_quality(static_cast<v1::ReadingQuality>(99));
  feed.send(wrong);
  const v1::FeedResponse taken = feed.until_taken(2);
  ASSERT_EQ(taken.refused_size(), 1);
  EXPECT_EQ(taken.refused(0).reason(), v1::UNKNOWN_QUALITY);
}

TEST_F(FeedTest, FutureAndPastAreRefused) {
  clock_.set(kStart);
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  feed.send(batch({.first_sequence = 1, .start_ns = kStart + 60 * kSecond, .rows = 1}));      // just allowed
  feed.send(batch({.first_sequence = 2, .start_ns = kStart + 60 * kSecond + 1, .rows = 1}));  // not any more
  feed.send(batch({.first_sequence = 3, .start_ns = kStart, .rows = 1}));  // before the clock
  feed.send(batch({.first_sequence = 4, .start_ns = std::numeric_limits<std::int64_t>::min(), .rows = 1}));
  feed.send(batch({.first_sequence = 5, .start_ns = std::numeric_limits<std::int64_t>::max(), .rows = 1}));
  const v1::FeedResponse taken = feed.until_taken(5);
  ASSERT_EQ(taken.refused_size(), 4);
  EXPECT_EQ(taken.refused(0).reason(), v1::TOO_FAR_AHEAD);
  EXPECT_EQ(taken.refused(1).reason(), v1::TOO_OLD);
  EXPECT_NE(taken.refused(1).message().find("left: time is"), std::string::npos);
  EXPECT_EQ(taken.refused(2).reason(), v1::TOO_OLD);
  EXPECT_EQ(taken.refused(3).reason(), v1::TOO_FAR_AHEAD);
}

TEST_F(FeedTest, FirstReadingMayHaveAnyAge) {
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  feed.send(batch({.start_ns = -kSecond, .rows = 2}));
  EXPECT_EQ(feed.until_taken(2).refused_total(), 0U);
}

TEST_F(FeedTest, RowsOfABatchMayBeOutOfOrder) {
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  feed.send(batch({.start_ns = kStart + 2000 * kSecond / 10, .step_ns = -kSecond / 10, .rows = 2000}));
  const v1::FeedResponse taken = feed.until_taken(2000);
  EXPECT_EQ(taken.refused_total(), 0U);
  v1::Moment moment;
  ASSERT_TRUE(estimate("trolley", moment).ok());
  EXPECT_EQ(moment.clock_ns(), kStart + 2000 * kSecond / 10);
}

TEST_F(FeedTest, RefusalsAreListedUpToABoundAndCounted) {
  FeedCall feed(*stub_, "trolley", "plc", {"middle"});
  feed.send(batch({.rows = 5000}));
  const v1::FeedResponse taken = feed.until_taken(5000);
  EXPECT_EQ(taken.refused_size(), 100);
  EXPECT_EQ(taken.refused_total(), 5000U);
}

TEST_F(FeedTest, HugeBatchEndsTheFeedAndNamesTheLimit) {
  EXPECT_TRUE(is_status(status_of(batch({.rows = 65537})), StatusCode::INVALID_ARGUMENT, "at most 65536"));
}

TEST_F(FeedTest, ColumnsThatDoNotFitEndTheFeed) {
  v1::Batch wrong = batch({.rows = 3});
  wrong.add_value(1.0);
  EXPECT_TRUE(is_status(status_of(wrong), StatusCode::INVALID_ARGUMENT, "3, 3 and 4 rows"));
}

TEST_F(FeedTest, MessagesOutOfPlaceEndTheFeed) {
  grpc::ClientContext context;
  auto stream = stub_->Feed(&context);
  v1::FeedRequest request;
  *request.mutable_batch() = batch({});
  stream->Write(request);
  EXPECT_TRUE(is_status(stream->Finish(), StatusCode::INVALID_ARGUMENT, "opening: is missing"));

  grpc::ClientContext empty_context;
  stream = stub_->Feed(&empty_context);
  stream->WritesDone();
  EXPECT_TRUE(is_status(stream->Finish(), StatusCode::INVALID_ARGUMENT, "opening: is missing"));

  grpc::ClientContext blank_context;
  stream = stub_->Feed(&blank_context);
  stream->Write(v1::FeedRequest());
  EXPECT_TRUE(is_status(stream->Finish(), StatusCode::INVALID_ARGUMENT, "content: is empty"));

  grpc::ClientContext twice_context;
  stream = stub_->Feed(&twice_context);
  request.mutable_opening()->set_rig("trolley");
  request.mutable_opening()->set_source("plc");
  stream->Write(request);
  stream->Write(request);
  v1::FeedResponse answer;
  while (stream->Read(&answer)) {
  }
  EXPECT_TRUE(is_status(stream->Finish(), StatusCode::INVALID_ARGUMENT, "opening: came twice"));
}

TEST_F(FeedTest, OpeningsAreChecked) {
  EXPECT_TRUE(is_status(FeedCall(*stub_, "nobody", "plc", {}).status(), StatusCode::NOT_FOUND, "\"nobody\""));
  EXPECT_TRUE(is_status(FeedCall(*stub_, "trolley", "", {}).status(), StatusCode::INVALID_ARGUMENT,
                        "opening.source:"));
  EXPECT_TRUE(is_status(FeedCall(*stub_, "trolley", std::string(256, 's'), {}).status(),
                        StatusCode::INVALID_ARGUMENT, "opening.source:"));
  EXPECT_TRUE(is_status(FeedCall(*stub_, "trolley", "plc", std::vector<std::string>(4097, "left")).status(),
                        StatusCode::INVALID_ARGUMENT, "opening.channels:"));
}

constexpr const char* kYard = R"(
rig: yard
response: 10 s
states:
  east:  {unit: m, start: 1, start_sd: 10}
  north: {unit: m, start: 2, start_sd: 10}
unrest: {east: 0.01, north: 0.01}
channels:
  fix:  {reads: [east, north], sd: [0.1, 0.1], range: [[-99, 99], [-99, 99]], period: 1 s}
  tape: {reads: east, sd: 0.1, range: [-99, 99], period: 1 s}
)";

/// Rows fix, tape, fix, tape …; fix reads (7, −3), with `more` further values in all.
v1::Batch yard_batch(std::uint64_t first, int rows, int more) {
  v1::Batch columns = batch({.first_sequence = first,
                             .start_ns = kStart + static_cast<std::int64_t>(first) * kSecond,
                             .step_ns = kSecond / 2,
                             .rows = rows,
                             .value = 7.0});
  for (int i = 1; i < rows; i += 2) columns.set_channel(i, 1);
  for (int i = 0; i < more; ++i) columns.add_more_values(-3.0 + 0.001 * i);
  return columns;
}

TEST_F(FeedTest, VectorReadingsAreTakenWithAllTheirParts) {
  ASSERT_TRUE(put(kYard).ok());
  FeedCall feed(*stub_, "yard", "plc", {"fix", "tape"});
  feed.answer();
  feed.send(yard_batch(1, 20, 10));
  EXPECT_EQ(feed.until_taken(20).refused_total(), 0U);
  v1::Reading single;
  single.set_sequence(21);
  single.set_time_ns(kStart + 60 * kSecond);
  single.set_value(7.0);
  single.add_more_values(-3.0);
  feed.send(single);
  EXPECT_EQ(feed.until_taken(21).refused_total(), 0U);
  v1::Moment moment;
  ASSERT_TRUE(estimate("yard", moment).ok());
  EXPECT_EQ(moment.time_ns(), kStart + 60 * kSecond);
  EXPECT_NEAR(moment.states(0).mean(), 7.0, 0.1);
}

TEST_F(FeedTest, AWrongNumberOfPartsRefusesTheBatchsReadings) {
  ASSERT_TRUE(put(kYard).ok());
  FeedCall feed(*stub_, "yard", "plc", {"fix", "tape"});
  feed.answer();
  feed.send(yard_batch(1, 4, 3));
  const v1::FeedResponse answer = feed.until_taken(4);
  ASSERT_EQ(answer.refused_size(), 4);
  EXPECT_EQ(answer.refused(0).reason(), v1::WRONG_PARTS);
  EXPECT_EQ(answer.refused(3).message(),
            "batch.more_values: has 3; its rows of vector channels must have 2 together");
  feed.send(yard_batch(5, 4, 2));
  EXPECT_EQ(feed.until_taken(8).refused_total(), 4U) << "the feed goes on";
  v1::Reading single;
  single.set_sequence(9);
  single.set_time_ns(kStart + 60 * kSecond);
  feed.send(single);
  const v1::FeedResponse alone = feed.until_taken(9);
  ASSERT_EQ(alone.refused_size(), 1);
  EXPECT_EQ(alone.refused(0).message(), "fix: has 1 values; must have 2, one for each part");
}

TEST_F(FeedTest, APartThatIsNotFiniteRefusesItsReadingAlone) {
  ASSERT_TRUE(put(kYard).ok());
  FeedCall feed(*stub_, "yard", "plc", {"fix", "tape"});
  feed.answer();
  v1::Batch columns = yard_batch(1, 6, 3);
  columns.set_more_values(1, std::numeric_limits<double>::quiet_NaN());
  columns.set_more_values(2, std::numeric_limits<double>::infinity());
  columns.add_quality_row(4);
  columns.add_quality(v1::BAD);
  feed.send(columns);
  const v1::FeedResponse answer = feed.until_taken(6);
  ASSERT_EQ(answer.refused_size(), 1) << "what is called bad may be any number";
  EXPECT_EQ(answer.refused(0).sequence(), 3U);
  EXPECT_EQ(answer.refused(0).reason(), v1::NOT_FINITE);
  EXPECT_EQ(answer.refused(0).message(), "fix.2: value is nan; must be finite");
}

TEST_F(FeedTest, NewFeedOfASourceTakesOver) {
  FeedCall older(*stub_, "trolley", "plc", {"left"});
  older.send(batch({.rows = 10}));
  older.until_taken(10);
  FeedCall newer(*stub_, "trolley", "plc", {"left"});
  EXPECT_EQ(newer.answer().opened().next_sequence(), 11U);
  EXPECT_TRUE(is_status(older.status(), StatusCode::ABORTED, "source: plc"));
  newer.send(batch({.first_sequence = 11, .start_ns = kStart + 2 * kSecond, .rows = 5}));
  newer.until_taken(15);
}

TEST_F(FeedTest, CancelledFeedLeavesTheServiceWell) {
  for (int i = 0; i < 20; ++i) {
    FeedCall feed(*stub_, "trolley", "plc", {"left"});
    feed.send(
        batch({.first_sequence = 1 + 10 * static_cast<std::uint64_t>(i), .start_ns = kStart + i * kSecond}));
  }  // goes away without reading any answer
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  const std::uint64_t next = feed.answer().opened().next_sequence();
  feed.send(batch({.first_sequence = next, .start_ns = kStart + 100 * kSecond}));
  EXPECT_EQ(feed.until_taken(next + 9).refused_total(), 0U);
}

TEST_F(FeedTest, TwoRigsAtOnceDoNotMix) {
  ASSERT_TRUE(put(trolley("other")).ok());
  const auto run = [this](const std::string& rig, double value) {
    FeedCall feed(*stub_, rig, "plc", {"left", "right"});
    for (std::uint64_t i = 0; i < 50; ++i) {
      feed.send(batch({.first_sequence = 1 + 10 * i,
                       .start_ns = kStart + static_cast<std::int64_t>(i) * kSecond,
                       .value = value,
                       .step = 0.0}));
    }
    feed.until_taken(500);
    EXPECT_TRUE(feed.close().ok());
  };
  std::thread first(run, "trolley", 2.0);
  std::thread second(run, "other", -7.0);
  first.join();
  second.join();
  v1::Moment moment;
  ASSERT_TRUE(estimate("trolley", moment).ok());
  EXPECT_NEAR(moment.states(0).mean(), 2.0, 0.05);
  ASSERT_TRUE(estimate("other", moment).ok());
  EXPECT_NEAR(moment.states(0).mean(), -7.0, 0.05);
}

TEST_F(FeedTest, TooManyFeedsAndSourcesAreRefused) {
  ServerOptions options;
  options.limits.feeds_per_rig = 2;
  options.limits.sources_per_rig = 3;
  start(options);
  ASSERT_TRUE(put(trolley()).ok());
  FeedCall a(*stub_, "trolley", "a", {});
  a.answer();
  {
    FeedCall b(*stub_, "trolley", "b", {});
    b.answer();
    EXPECT_TRUE(
        is_status(FeedCall(*stub_, "trolley", "c", {}).status(), StatusCode::RESOURCE_EXHAUSTED, "2 feeds"));
    EXPECT_TRUE(b.close().ok());
  }
  // The service hears of b's end a moment later than its caller.
  while (FeedCall(*stub_, "trolley", "c", {}).close().error_code() == StatusCode::RESOURCE_EXHAUSTED) {
    std::this_thread::sleep_for(std::chrono::milliseconds(1));
  }
  grpc::Status status;
  do {
    status = FeedCall(*stub_, "trolley", "d", {}).status();
  } while (status.error_message().find("2 feeds") != std::string::npos);
  EXPECT_TRUE(is_status(status, StatusCode::RESOURCE_EXHAUSTED, "3 sources"));
}

}  // namespace
}  // namespace steelyard::service
