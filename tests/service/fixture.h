// SPDX-License-Identifier: Apache-2.0
// A service in the test's own process, on a free port of the loopback, with a clock that the test sets; and
// small verbs to talk to it over the wire.
#pragma once

#include <grpcpp/grpcpp.h>
#include <gtest/gtest.h>

#include <atomic>
#include <condition_variable>
#include <cstdint>
#include <memory>
#include <mutex>
#include <string>
#include <vector>

#include "service/server.h"
#include "steelyard/v1/service.grpc.pb.h"

namespace steelyard::service {

inline constexpr std::int64_t kSecond = 1'000'000'000;
inline constexpr std::int64_t kStart = 1'700'000'000 * kSecond;

/// Says what the test sets; can hold up whoever asks (a rig's worker asks at every reading, so this makes it
/// slow).
class TestClock final : public Clock {
 public:
  [[nodiscard]] engine::TimeNs now_ns() const override;
  [[nodiscard]] SteadyTime steady() const override { return std::chrono::steady_clock::now(); }

  void set(engine::TimeNs now_ns) { now_ns_ = now_ns; }
  void close_gate();
  void open_gate();
  /// Waits until somebody stands at the gate.
  void wait_for_visitor() const;

 private:
  std::atomic<engine::TimeNs> now_ns_{kStart + 1000 * kSecond};
  mutable std::mutex mutex_;
  mutable std::condition_variable changed_;
  bool closed_ = false;
  mutable int visitors_ = 0;
};

/// A trolley: position and speed, two encoders that read the position, one command.
[[nodiscard]] std::string trolley(const std::string& name = "trolley", const std::string& more = "");

/// One open feed over the wire.
class FeedCall {
 public:
  FeedCall(v1::Steelyard::Stub& stub, const std::string& rig, const std::string& source,
           const std::vector<std::string>& channels);
  ~FeedCall();

  bool send(const v1::Batch& batch);
  bool send(const v1::Reading& reading);
  /// The next answer; fails the test if there is none.
  v1::FeedResponse answer();
  /// Answers until `sequence` is taken, merged into one.
  v1::FeedResponse until_taken(std::uint64_t sequence);
  grpc::Status close();   // closes our side, reads the rest
  grpc::Status status();  // reads the rest

 private:
  grpc::ClientContext context_;
  std::unique_ptr<grpc::ClientReaderWriter<v1::FeedRequest, v1::FeedResponse>> stream_;
  bool finished_ = false;
};

/// One open watch over the wire.
class WatchCall {
 public:
  WatchCall(v1::Steelyard::Stub& stub, const v1::WatchRequest& request);
  ~WatchCall();
  /// The next update; fails the test if there is none.
  v1::WatchResponse next();
  bool next(v1::WatchResponse& update) { return stream_->Read(&update); }
  grpc::Status status();  // reads the rest

 private:
  grpc::ClientContext context_;
  std::unique_ptr<grpc::ClientReader<v1::WatchResponse>> stream_;
  bool finished_ = false;
};

[[nodiscard]] v1::WatchRequest watch_request(const std::string& rig);

/// Rows of one channel: value `value + i*step`, times from `start_ns` on, `step_ns` apart.
struct Ramp {
  std::uint64_t first_sequence = 1;
  std::int64_t start_ns = kStart;
  std::int64_t step_ns = kSecond / 10;
  int rows = 10;
  std::uint32_t channel = 0;
  double value = 1.0;
  double step = 0.001;
};
[[nodiscard]] v1::Batch batch(const Ramp& ramp);

class ServiceTest : public ::testing::Test {
 protected:
  /// Starts with these options (port 0 is put in).
  void start(ServerOptions options = {});
  void SetUp() override { start(); }
  void TearDown() override;

  [[nodiscard]] std::unique_ptr<v1::Steelyard::Stub> new_stub(
      const grpc::ChannelArguments& arguments = {}) const;
  grpc::Status put(const std::string& yaml, v1::PutRigResponse* answer = nullptr, bool dry_run = false);
  grpc::Status estimate(const std::string& rig, v1::Moment& moment);
  grpc::Status estimate_at(const std::string& rig, std::int64_t time_ns, v1::Moment& moment);
  grpc::Status remove(const std::string& rig);

  TestClock clock_;
  std::unique_ptr<Server> server_;
  std::unique_ptr<v1::Steelyard::Stub> stub_;
};

/// Exact code plus a piece of text.
::testing::AssertionResult is_status(const grpc::Status& status, grpc::StatusCode code,
                                     const std::string& piece);

}  // namespace steelyard::service
