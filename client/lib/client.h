// SPDX-License-Identifier: Apache-2.0
// The C++ client library: one connection to a steelyardd, its rigs, feeds, watches and estimates.
//
//   steelyard::client::Client client("127.0.0.1:7411");
//   if (grpc::Status status = client.connect(); !status.ok()) {        // tried for 30 s, with back-off
//     std::cerr << status.error_message() << '\n';
//     return 1;
//   }
//   steelyard::v1::PutRigResponse put;
//   if (auto status = client.put_rig({.text = yaml, .file_name = "basin.yaml"}, put); !status.ok()) { ... }
//   for (const auto& problem : put.problems()) std::cerr << problem.text() << '\n';   // wrong: nothing was
//   put
//
//   auto feed = client.feed({.rig = "basin", .source = "plc-1", .channels = {"sonic", "radar"}});
//   if (auto status = feed->open(); !status.ok()) { ... }              // feed.h: goes on where the service
//   says
//
// Errors are grpc::Status; the codes' meanings stand at the top of proto/steelyard/v1/service.proto. Nothing
// here throws, save std::bad_alloc.
#pragma once

#include <grpcpp/channel.h>
#include <grpcpp/support/status.h>

#include <chrono>
#include <cstdint>
#include <functional>
#include <memory>
#include <optional>
#include <stop_token>
#include <string>
#include <vector>

#include "lib/feed.h"
#include "steelyard/v1/service.grpc.pb.h"

namespace steelyard::client {

/// How long to try before giving up, and how long one unary call may take.
struct Patience {
  std::chrono::milliseconds connect{30'000};  ///< also for a feed that has lost its connection
  std::chrono::milliseconds call{30'000};     ///< deadline of a unary call
};

struct PutRig {
  std::string text{};       ///< of a rig file
  std::string file_name{};  ///< for messages
  bool dry_run = false;
  std::string author{};
  std::string reason{};
};

/// Safe to use from several threads at once. Feeds may outlive the client.
class Client {
 public:
  /// Connects to nothing yet. `address` is HOST:PORT.
  explicit Client(const std::string& address, Patience patience = {});

  /// Waits, with back-off, until the service answers; UNAVAILABLE if it does not within patience.connect,
  /// CANCELLED when `stop` is requested.
  [[nodiscard]] grpc::Status connect(std::stop_token stop = {});

  /// OK also for a wrong description: look at answer.problems() first; if there are any, nothing was put.
  [[nodiscard]] grpc::Status put_rig(const PutRig& request, v1::PutRigResponse& answer);
  [[nodiscard]] grpc::Status get_rig(const std::string& name, v1::GetRigResponse& answer);
  /// All of them, in bytewise order of name.
  [[nodiscard]] grpc::Status list_rigs(std::vector<v1::RigSummary>& rigs);
  [[nodiscard]] grpc::Status remove_rig(const std::string& name, const std::string& author = {},
                                        const std::string& reason = {});
  /// The machine at `time_ns`, or at the rig's clock if that is empty.
  [[nodiscard]] grpc::Status estimate(const std::string& rig, std::optional<std::int64_t> time_ns,
                                      v1::Moment& moment);

  /// Return false to end the watch. Called on the thread that called watch().
  using OnUpdate = std::function<bool(const v1::WatchResponse&)>;

  /// Blocks until the watch ends: OK if on_update ended it or `stop` was requested, else the service's
  /// status. It does not reconnect: the caller decides whether a gap matters.
  [[nodiscard]] grpc::Status watch(const v1::WatchRequest& request, const OnUpdate& on_update,
                                   std::stop_token stop = {});

  /// A feed that is not open yet; see feed.h.
  [[nodiscard]] std::unique_ptr<Feed> feed(FeedOptions options);

 private:
  std::shared_ptr<grpc::Channel> channel_;
  std::shared_ptr<v1::Steelyard::Stub> stub_;
  std::string address_;
  Patience patience_;
};

}  // namespace steelyard::client
