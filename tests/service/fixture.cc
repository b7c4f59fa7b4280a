// SPDX-License-Identifier: Apache-2.0
// The verbs of the service's tests.
#include "fixture.h"

namespace steelyard::service {

engine::TimeNs TestClock::now_ns() const {
  std::unique_lock lock(mutex_);
  ++visitors_;
  changed_.notify_all();
  changed_.wait(lock, [&] { return !closed_; });
  --visitors_;
  return now_ns_;
}

void TestClock::close_gate() {
  const std::lock_guard lock(mutex_);
  closed_ = true;
}

void TestClock::open_gate() {
  const std::lock_guard lock(mutex_);
  closed_ = false;
  changed_.notify_all();
}

void TestClock::wait_for_visitor() const {
  std::unique_lock lock(mutex_);
  changed_.wait(lock, [&] { return visitors_ > 0; });
}

std::string trolley(const std::string& name, const std::string& more) {
  return "rig: " + name + R"(
response: 1 s
horizon: 10 s
states:
  position: {unit: m, start: 0, start_sd: 5, needs: 0.5}
  speed: {unit: m/s, start: 0, start_sd: 1}
inputs:
  push: {unit: m/s2, start: 0, sd: 0.01, range: [-2, 2]}
motion:
  position: speed
  speed: push
unrest: {speed: 0.2}
channels:
  left: {reads: position, sd: 0.01, range: [-10, 10], resolution: 0.0001}
  right: {reads: position, sd: 0.02, range: [-10, 10], resolution: 0.0001}
)" + more;
}

FeedCall::FeedCall(v1::Steelyard::Stub& stub, const std::string& rig, const std::string& source,
                   const std::vector<std::string>& channels)
    : stream_(stub.Feed(&context_)) {
  v1::FeedRequest request;
  request.mutable_opening()->set_rig(rig);
  request.mutable_opening()->set_source(source);
  request.mutable_opening()->mutable_channels()->Assign(channels.begin(), channels.end());
  stream_->Write(request);
}

FeedCall::~FeedCall() {
  if (finished_) return;
  context_.TryCancel();
  (void)status();
}

bool FeedCall::send(const v1::Batch& batch) {
  v1::FeedRequest request;
  *request.mutable_batch() = batch;
  return stream_->Write(request);
}

bool FeedCall::send(const v1::Reading& reading) {
  v1::FeedRequest request;
  *request.mutable_reading() = reading;
  return stream_->Write(request);
}

v1::FeedResponse FeedCall::answer() {
  v1::FeedResponse answer;
  EXPECT_TRUE(stream_->Read(&answer)) << "the feed has ended";
  return answer;
}

v1::FeedResponse FeedCall::until_taken(std::uint64_t sequence) {
  v1::FeedResponse merged;
  v1::FeedResponse next;
  while (merged.taken() < sequence) {
    if (!stream_->Read(&next)) {
      ADD_FAILURE() << "the feed has ended at " << merged.taken() << " of " << sequence;
      break;
    }
    merged.MergeFrom(next);  // numbers are replaced, refusals appended
  }
  return merged;
}

grpc::Status FeedCall::close() {
  stream_->WritesDone();
  return status();
}

grpc::Status FeedCall::status() {
  v1::FeedResponse rest;
  while (stream_->Read(&rest)) {
  }
  finished_ = true;
  return stream_->Finish();
}

WatchCall::WatchCall(v1::Steelyard::Stub& stub, const v1::WatchRequest& request)
    : stream_(stub.Watch(&context_, request)) {}

WatchCall::~WatchCall() {
  if (finished_) return;
  context_.TryCancel();
  (void)status();
}

v1::WatchResponse WatchCall::next() {
  v1::WatchResponse update;
  EXPECT_TRUE(stream_->Read(&update)) << "the watch has ended";
  return update;
}

grpc::Status WatchCall::status() {
  v1::WatchResponse rest;
  while (stream_->Read(&rest)) {
  }
  finished_ = true;
  return stream_->Finish();
}

v1::WatchRequest watch_request(const std::string& rig) {
  v1::WatchRequest request;
  request.set_rig(rig);
  return request;
}

v1::Batch batch(const Ramp& ramp) {
  v1::Batch batch;
  batch.set_first_sequence(ramp.first_sequence);
  batch.set_base_time_ns(ramp.start_ns);
  for (int i = 0; i < ramp.rows; ++i) {
    batch.add_time_step_ns(i == 0 ? 0 : ramp.step_ns);
    batch.add_channel(ramp.channel);
    batch.add_value(ramp.value + i * ramp.step);
  }
  return batch;
}

void ServiceTest::start(ServerOptions options) {
  options.listen = "127.0.0.1:0";
  stub_.reset();
  server_ = std::make_unique<Server>(std::move(options), clock_);
  ASSERT_EQ(server_->start(), "");
  stub_ = new_stub();
}

void ServiceTest::TearDown() {
  clock_.open_gate();
  stub_.reset();
  server_.reset();
}

std::unique_ptr<v1::Steelyard::Stub> ServiceTest::new_stub(const grpc::ChannelArguments& given) const {
  grpc::ChannelArguments arguments = given;
  arguments.SetInt(GRPC_ARG_USE_LOCAL_SUBCHANNEL_POOL, 1);
  const std::string address = "127.0.0.1:" + std::to_string(server_->port());
  return v1::Steelyard::NewStub(
      grpc::CreateCustomChannel(address, grpc::InsecureChannelCredentials(), arguments));
}

grpc::Status ServiceTest::put(const std::string& yaml, v1::PutRigResponse* answer, bool dry_run) {
  v1::PutRigRequest request;
  request.set_file(yaml);
  request.set_file_name("test.yaml");
  request.set_dry_run(dry_run);
  grpc::ClientContext context;
  v1::PutRigResponse ignored;
  return stub_->PutRig(&context, request, answer ? answer : &ignored);
}

grpc::Status ServiceTest::estimate(const std::string& rig, v1::Moment& moment) {
  v1::EstimateRequest request;
  request.set_rig(rig);
  grpc::ClientContext context;
  v1::EstimateResponse response;
  const grpc::Status status = stub_->Estimate(&context, request, &response);
  moment = response.moment();
  return status;
}

grpc::Status ServiceTest::estimate_at(const std::string& rig, std::int64_t time_ns, v1::Moment& moment) {
  v1::EstimateRequest request;
  request.set_rig(rig);
  request.set_time_ns(time_ns);
  grpc::ClientContext context;
  v1::EstimateResponse response;
  const grpc::Status status = stub_->Estimate(&context, request, &response);
  moment = response.moment();
  return status;
}

grpc::Status ServiceTest::remove(const std::string& rig) {
  v1::RemoveRigRequest request;
  request.set_name(rig);
  grpc::ClientContext context;
  v1::RemoveRigResponse response;
  return stub_->RemoveRig(&context, request, &response);
}

::testing::AssertionResult is_status(const grpc::Status& status, grpc::StatusCode code,
                                     const std::string& piece) {
  if (status.error_code() == code && status.error_message().find(piece) != std::string::npos) {
    return ::testing::AssertionSuccess();
  }
  return ::testing::AssertionFailure() << "status " << status.error_code() << " \"" << status.error_message()
                                       << "\"; expected " << code << " with \"" << piece << "\"";
}

}  // namespace steelyard::service
