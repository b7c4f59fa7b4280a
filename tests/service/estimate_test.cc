// SPDX-License-Identifier: Apache-2.0
// Estimate: now, ahead, and outside of what may be asked; the rule of an estimate's quality.
#include <limits>

#include "fixture.h"
#include "service/convert.h"

namespace steelyard::service {
namespace {

using grpc::StatusCode;

class EstimateTest : public ServiceTest {
 protected:
  void SetUp() override {
    ServiceTest::SetUp();
    ASSERT_TRUE(put(trolley()).ok());
  }
};

TEST_F(EstimateTest, BeforeTheFirstReadingThereIsTheStartButNoClock) {
  v1::Moment moment;
  ASSERT_TRUE(estimate("trolley", moment).ok());
  EXPECT_FALSE(moment.started());
  EXPECT_EQ(moment.clock_ns(), 0);
  EXPECT_NEAR(moment.states(0).sd(), 5.0, 1e-9);
  EXPECT_EQ(moment.quality(), v1::ESTIMATE_BAD);
  EXPECT_TRUE(is_status(estimate_at("trolley", kStart, moment), StatusCode::FAILED_PRECONDITION, "time_ns:"));
  EXPECT_TRUE(is_status(estimate("nobody", moment), StatusCode::NOT_FOUND, "\"nobody\""));
}

TEST_F(EstimateTest, ReachesFromTheClockToOneHorizonAfterIt) {
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  feed.send(batch({.rows = 20}));
  feed.until_taken(20);
  const std::int64_t clock_ns = kStart + 19 * kSecond / 10;
  v1::Moment now;
  v1::Moment ahead;
  ASSERT_TRUE(estimate_at("trolley", clock_ns, now).ok());
  ASSERT_TRUE(estimate_at("trolley", clock_ns + 10 * kSecond, ahead).ok());
  EXPECT_EQ(ahead.time_ns(), clock_ns + 10 * kSecond);
  EXPECT_EQ(ahead.clock_ns(), clock_ns);
  EXPECT_GT(ahead.states(0).sd(), now.states(0).sd());
  EXPECT_NEAR(ahead.channels(0).age_s(), 10.0, 1e-9);
  EXPECT_TRUE(is_status(estimate_at("trolley", clock_ns - 1, ahead), StatusCode::OUT_OF_RANGE, "time_ns:"));
  EXPECT_TRUE(is_status(estimate_at("trolley", clock_ns + 10 * kSecond + 1, ahead), StatusCode::OUT_OF_RANGE,
                        "time_ns:"));
  v1::Moment after;  // looking ahead has changed nothing
  ASSERT_TRUE(estimate("trolley", after).ok());
  EXPECT_EQ(after.states(0).mean(), now.states(0).mean());
  EXPECT_EQ(after.states(0).sd(), now.states(0).sd());
}

Picture picture_with(double within, double mean = 0.0) {
  Picture picture;
  picture.started = true;
  picture.estimate.states.resize(2);
  picture.estimate.states[1].within_needs = within;
  picture.estimate.states[1].mean = mean;
  return picture;
}

TEST(EstimateQuality, FollowsTheWorstState) {
  EXPECT_EQ(quality_of(picture_with(1.0)), v1::ESTIMATE_GOOD);
  EXPECT_EQ(quality_of(picture_with(0.95)), v1::ESTIMATE_GOOD);
  EXPECT_EQ(quality_of(picture_with(0.949)), v1::ESTIMATE_UNCERTAIN);
  EXPECT_EQ(quality_of(picture_with(0.5)), v1::ESTIMATE_UNCERTAIN);
  EXPECT_EQ(quality_of(picture_with(0.499)), v1::ESTIMATE_BAD);
  EXPECT_EQ(quality_of(picture_with(std::numeric_limits<double>::quiet_NaN())), v1::ESTIMATE_BAD);
  EXPECT_EQ(quality_of(picture_with(1.0, std::numeric_limits<double>::infinity())), v1::ESTIMATE_BAD);
  Picture old = picture_with(1.0);
  old.at_horizon = true;
  EXPECT_EQ(quality_of(old), v1::ESTIMATE_BAD);
  Picture unborn = picture_with(1.0);
  unborn.started = false;
  EXPECT_EQ(quality_of(unborn), v1::ESTIMATE_BAD);
}

}  // namespace
}  // namespace steelyard::service
