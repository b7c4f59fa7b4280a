// SPDX-License-Identifier: Apache-2.0
// PutRig, GetRig, ListRigs, RemoveRig.
#include <algorithm>

#include "fixture.h"
#include "service/registry.h"
#include "service/status.h"

namespace steelyard::service {
namespace {

using grpc::StatusCode;

class RigsTest : public ServiceTest {
 protected:
  grpc::Status put_message(const v1::Rig& rig, v1::PutRigResponse& answer) {
    v1::PutRigRequest request;
    *request.mutable_rig() = rig;
    grpc::ClientContext context;
    return stub_->PutRig(&context, request, &answer);
  }
  grpc::Status get(const std::string& name, std::uint64_t revision, v1::GetRigResponse& answer) {
    v1::GetRigRequest request;
    request.set_name(name);
    request.set_revision(revision);
    grpc::ClientContext context;
    return stub_->GetRig(&context, request, &answer);
  }
  v1::ListRigsResponse list(const std::string& after, std::uint32_t at_most) {
    v1::ListRigsRequest request;
    request.set_after(after);
    request.set_at_most(at_most);
    grpc::ClientContext context;
    v1::ListRigsResponse answer;
    EXPECT_TRUE(stub_->ListRigs(&context, request, &answer).ok());
    return answer;
  }
};

bool contains(const google::protobuf::RepeatedPtrField<std::string>& list, const std::string& item) {
  return std::find(list.begin(), list.end(), item) != list.end();
}

std::string replaced(std::string text, const std::string& from, const std::string& to) {
  const auto at = text.find(from);
  EXPECT_NE(at, std::string::npos) << from;
  return at == std::string::npos ? text : text.replace(at, from.size(), to);
}

TEST_F(RigsTest, NewRigIsRevisionOneAndAllOfItIsNew) {
  v1::PutRigResponse answer;
  ASSERT_TRUE(put(trolley(), &answer).ok());
  EXPECT_EQ(answer.name(), "trolley");
  EXPECT_EQ(answer.revision(), 1U);
  EXPECT_EQ(answer.change().kind(), v1::RigChange::NEW);
  EXPECT_TRUE(contains(answer.change().anew(), "states.position"));
  EXPECT_TRUE(contains(answer.change().anew(), "channels.left"));
}

TEST_F(RigsTest, SameTextMakesNoRevision) {
  ASSERT_TRUE(put(trolley()).ok());
  v1::PutRigResponse answer;
  ASSERT_TRUE(put(trolley(), &answer).ok());
  EXPECT_EQ(answer.revision(), 1U);
  EXPECT_EQ(answer.change().kind(), v1::RigChange::UNCHANGED);
  EXPECT_FALSE(answer.change().restarted());
}

TEST_F(RigsTest, CommentsAndLabelsKeepThePosterior) {
  ASSERT_TRUE(put(trolley()).ok());
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  feed.send(batch({}));
  feed.until_taken(10);
  v1::PutRigResponse answer;
  ASSERT_TRUE(
      put("# the long one\n" + replaced(trolley(), "sd: 0.02,", "sd: 0.02, tag: ZT-7,"), &answer).ok());
  EXPECT_EQ(answer.change().kind(), v1::RigChange::REWORDED);
  EXPECT_EQ(answer.revision(), 2U);
  EXPECT_EQ(answer.change().anew_size(), 0);
  v1::Moment moment;
  ASSERT_TRUE(estimate("trolley", moment).ok());
  EXPECT_TRUE(moment.started());
  EXPECT_EQ(moment.revision(), 2U);
}

TEST_F(RigsTest, ChangedRigStartsAnewAndSaysSo) {
  ASSERT_TRUE(put(trolley()).ok());
  FeedCall feed(*stub_, "trolley", "plc", {"left", "right"});
  feed.send(batch({}));
  feed.until_taken(10);
  v1::PutRigResponse answer;
  const std::string changed =
      replaced(replaced(trolley(), "  right:", "  laser:"), "start_sd: 1}", "start_sd: 2}");
  ASSERT_TRUE(put(changed, &answer, true).ok());  // dry: nothing happens
  EXPECT_EQ(answer.revision(), 2U);
  v1::Moment moment;
  ASSERT_TRUE(estimate("trolley", moment).ok());
  EXPECT_EQ(moment.revision(), 1U);
  EXPECT_TRUE(moment.started());

  ASSERT_TRUE(put(changed, &answer).ok());
  EXPECT_EQ(answer.change().kind(), v1::RigChange::CHANGED);
  EXPECT_TRUE(answer.change().restarted());
  EXPECT_TRUE(contains(answer.change().same(), "states.position"));
  EXPECT_TRUE(contains(answer.change().same(), "channels.left"));
  EXPECT_TRUE(contains(answer.change().anew(), "states.speed"));
  EXPECT_TRUE(contains(answer.change().anew(), "channels.laser"));
  EXPECT_TRUE(contains(answer.change().gone(), "channels.right"));
  ASSERT_TRUE(estimate("trolley", moment).ok());
  EXPECT_EQ(moment.revision(), 2U);
  EXPECT_FALSE(moment.started());
  EXPECT_EQ(moment.quality(), v1::ESTIMATE_BAD);

  // The feed goes on, is told what the rig does not have any more, and keeps its position.
  feed.send(batch({.first_sequence = 5, .start_ns = kStart + 10 * kSecond, .rows = 10}));
  const v1::FeedResponse response = feed.until_taken(14);
  EXPECT_EQ(response.opened().revision(), 2U);
  EXPECT_TRUE(contains(response.opened().unknown_channels(), "right"));
  EXPECT_EQ(response.repeated_total(), 6U);
}

TEST_F(RigsTest, ChangedConstantStartsWhatMentionsItAnew) {
  const std::string text =
      replaced(replaced(trolley(), "horizon: 10 s\n", "horizon: 10 s\nconstants: {gain: 1}\n"), "speed: push",
               "speed: push * gain");
  ASSERT_TRUE(put(text).ok());
  v1::PutRigResponse answer;
  ASSERT_TRUE(put(replaced(text, "gain: 1", "gain: 2"), &answer, true).ok());
  EXPECT_TRUE(contains(answer.change().anew(), "states.speed"));
  EXPECT_TRUE(contains(answer.change().same(), "states.position"));
}

TEST_F(RigsTest, WrongRigIsRefusedWithEveryProblem) {
  const std::string wrong =
      replaced(replaced(trolley(), "position, sd: 0.01", "position, sd: -0.01"), "unit: m,", "unti: m,");
  const grpc::Status status = put(wrong);
  EXPECT_TRUE(is_status(status, StatusCode::INVALID_ARGUMENT, "test.yaml:"));
  EXPECT_TRUE(
      is_status(status, StatusCode::INVALID_ARGUMENT, "channels.left.sd: is -0.01; must be greater than 0"));
  EXPECT_TRUE(is_status(status, StatusCode::INVALID_ARGUMENT, "unti"));
}

TEST_F(RigsTest, ProblemsComeAsFieldsWhenAskedFor) {
  v1::PutRigRequest request;
  request.set_file(replaced(trolley(), "position, sd: 0.01", "position, sd: -0.01"));
  request.set_answer_problems(true);
  grpc::ClientContext context;
  v1::PutRigResponse answer;
  ASSERT_TRUE(stub_->PutRig(&context, request, &answer).ok());
  ASSERT_EQ(answer.problems_size(), 1);
  EXPECT_EQ(answer.problems(0).field(), "channels.left.sd");
  EXPECT_EQ(answer.problems(0).line(), 14);
  EXPECT_EQ(answer.revision(), 0U);
  EXPECT_EQ(list("", 0).rigs_size(), 0);
}

TEST_F(RigsTest, HundredsOfProblemsFitIntoTheStatus) {
  std::string wrong = trolley();
  for (int i = 0; i < 500; ++i) wrong += "bogus_" + std::to_string(i) + ": 1\n";
  const grpc::Status status = put(wrong);
  EXPECT_TRUE(is_status(status, StatusCode::INVALID_ARGUMENT, " more"));
  EXPECT_LE(status.error_message().size(), 4200U);
}

TEST_F(RigsTest, DelayIsRefusedUntilTheServiceCanRewind) {
  const std::string delayed =
      trolley() + "  late: {reads: position, sd: 0.1, range: [-10, 10], delay: 5 s}\n";
  EXPECT_TRUE(is_status(put(delayed), StatusCode::FAILED_PRECONDITION, "channels.late.delay: is 5 s"));
}

TEST_F(RigsTest, EmptyAndOversizedRequestsAreRefused) {
  ServerOptions options;
  options.limits.rig_bytes = 4096;
  start(options);
  v1::PutRigRequest request;
  v1::PutRigResponse answer;
  {
    grpc::ClientContext context;
    EXPECT_TRUE(
        is_status(stub_->PutRig(&context, request, &answer), StatusCode::INVALID_ARGUMENT, "description:"));
  }
  EXPECT_TRUE(is_status(put(std::string(4097, '#')), StatusCode::INVALID_ARGUMENT, "has 4097 bytes"));
  request.set_file(trolley());
  request.set_author(std::string(256, 'a'));
  grpc::ClientContext context;
  EXPECT_TRUE(is_status(stub_->PutRig(&context, request, &answer), StatusCode::INVALID_ARGUMENT, "author:"));
}

TEST_F(RigsTest, GetReturnsTextAuthorAndOldRevisions) {
  clock_.set(kStart + 5 * kSecond);
  v1::PutRigRequest request;
  request.set_file(trolley());
  request.set_author("Ada");
  request.set_reason("first");
  grpc::ClientContext context;
  v1::PutRigResponse put_answer;
  ASSERT_TRUE(stub_->PutRig(&context, request, &put_answer).ok());
  const std::string second = replaced(trolley(), "sd: 0.02", "sd: 0.03");
  ASSERT_TRUE(put(second).ok());

  v1::GetRigResponse answer;
  ASSERT_TRUE(get("trolley", 0, answer).ok());
  EXPECT_EQ(answer.file(), second);
  ASSERT_TRUE(get("trolley", 1, answer).ok());
  EXPECT_EQ(answer.file(), trolley());
  EXPECT_EQ(answer.author(), "Ada");
  EXPECT_EQ(answer.reason(), "first");
  EXPECT_EQ(answer.put_time_ns(), kStart + 5 * kSecond);
  EXPECT_EQ(answer.rig().states().at("position").needs(), 0.5);
  EXPECT_TRUE(is_status(get("trolley", 7, answer), StatusCode::NOT_FOUND, "revision:"));
  EXPECT_TRUE(is_status(get("nobody", 0, answer), StatusCode::NOT_FOUND, "\"nobody\""));
}

TEST_F(RigsTest, MessageIsTheSameAsTheFile) {
  ASSERT_TRUE(put(trolley()).ok());
  v1::GetRigResponse file;
  ASSERT_TRUE(get("trolley", 0, file).ok());
  v1::PutRigResponse answer;
  ASSERT_TRUE(put_message(file.rig(), answer).ok());
  EXPECT_EQ(answer.change().kind(), v1::RigChange::REWORDED);  // another text, the same meaning
  v1::GetRigResponse message;
  ASSERT_TRUE(get("trolley", 0, message).ok());
  EXPECT_EQ(message.rig().SerializeAsString().size(), file.rig().SerializeAsString().size());
  ASSERT_TRUE(put_message(file.rig(), answer).ok());
  EXPECT_EQ(answer.change().kind(), v1::RigChange::UNCHANGED);
}

TEST_F(RigsTest, MessageWithWrongNumbersIsRefusedWithTheField) {
  ASSERT_TRUE(put(trolley()).ok());
  v1::GetRigResponse file;
  ASSERT_TRUE(get("trolley", 0, file).ok());
  v1::Rig rig = file.rig();
  (*rig.mutable_states())["speed"].set_start_sd(-1);
  v1::PutRigResponse answer;
  EXPECT_TRUE(
      is_status(put_message(rig, answer), StatusCode::INVALID_ARGUMENT, "states.speed.start_sd: is -1"));
  (*rig.mutable_states())["speed"].set_start_sd(std::numeric_limits<double>::quiet_NaN());
  EXPECT_TRUE(is_status(put_message(rig, answer), StatusCode::INVALID_ARGUMENT, "states.speed.start_sd"));
  (*rig.mutable_motion())["speed"] = google::protobuf::Value();
  EXPECT_EQ(put_message(rig, answer).error_code(), StatusCode::INVALID_ARGUMENT);
}

TEST_F(RigsTest, ListComesInPagesInOrderOfName) {
  for (const char* name : {"c", "a", "b"}) ASSERT_TRUE(put(trolley(name)).ok());
  v1::ListRigsResponse page = list("", 2);
  ASSERT_EQ(page.rigs_size(), 2);
  EXPECT_EQ(page.rigs(0).name(), "a");
  EXPECT_EQ(page.rigs(1).name(), "b");
  EXPECT_TRUE(page.more());
  EXPECT_EQ(page.rigs(0).states(), 2U);
  EXPECT_EQ(page.rigs(0).inputs(), 1U);
  EXPECT_EQ(page.rigs(0).channels(), 2U);
  page = list("b", 2);
  ASSERT_EQ(page.rigs_size(), 1);
  EXPECT_FALSE(page.more());
}

TEST_F(RigsTest, RemovedRigEndsItsStreams) {
  ASSERT_TRUE(put(trolley()).ok());
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  feed.answer();
  WatchCall watch(*stub_, watch_request("trolley"));
  watch.next();
  ASSERT_TRUE(remove("trolley").ok());
  EXPECT_TRUE(is_status(feed.status(), StatusCode::NOT_FOUND, "removed"));
  EXPECT_TRUE(is_status(watch.status(), StatusCode::NOT_FOUND, "removed"));
  v1::Moment moment;
  EXPECT_TRUE(is_status(estimate("trolley", moment), StatusCode::NOT_FOUND, "trolley"));
  EXPECT_TRUE(is_status(remove("trolley"), StatusCode::NOT_FOUND, "trolley"));
}

TEST_F(RigsTest, TooManyRigsAreRefused) {
  ServerOptions options;
  options.limits.rigs = 2;
  start(options);
  ASSERT_TRUE(put(trolley("a")).ok());
  ASSERT_TRUE(put(trolley("b")).ok());
  EXPECT_TRUE(is_status(put(trolley("c")), StatusCode::RESOURCE_EXHAUSTED, "2 rigs"));
  EXPECT_TRUE(put(trolley("a")).ok());
}

TEST(StatusTable, EveryErrorHasTheCodeOfWhatToDo) {
  EXPECT_EQ(code_of(Error::kWrongRequest), StatusCode::INVALID_ARGUMENT);
  EXPECT_EQ(code_of(Error::kWrongDescription), StatusCode::INVALID_ARGUMENT);
  EXPECT_EQ(code_of(Error::kNoSuchRig), StatusCode::NOT_FOUND);
  EXPECT_EQ(code_of(Error::kNotYetPossible), StatusCode::FAILED_PRECONDITION);
  EXPECT_EQ(code_of(Error::kNoClock), StatusCode::FAILED_PRECONDITION);
  EXPECT_EQ(code_of(Error::kTimeOutside), StatusCode::OUT_OF_RANGE);
  EXPECT_EQ(code_of(Error::kSourceTakenOver), StatusCode::ABORTED);
  EXPECT_EQ(code_of(Error::kLimit), StatusCode::RESOURCE_EXHAUSTED);
  EXPECT_EQ(code_of(Error::kStopping), StatusCode::UNAVAILABLE);
  EXPECT_EQ(code_of(Error::kInternal), StatusCode::INTERNAL);
}

}  // namespace
}  // namespace steelyard::service
