// SPDX-License-Identifier: Apache-2.0
// One source that feeds one rig: sends batches with flow control, holds what has not been taken yet, and
// after a break connects again by itself and goes on where the service says.
//
//   auto feed = client.feed({.rig = "basin", .source = "plc-1", .channels = {"sonic", "radar"}});
//   if (auto status = feed->open(); !status.ok()) return fail(status);     // e.g. NOT_FOUND: no such rig
//   for (std::uint64_t row = feed->progress().next_sequence; row <= rows; row += batch_size) {
//     if (auto status = feed->send(make_batch(row)); !status.ok()) return fail(status);
//   }
//   if (auto status = feed->finish(); !status.ok()) return fail(status);   // OK: everything has been taken
//   report(feed->progress().refused, feed->progress().refusals);           // refused readings do not fail a
//   feed
#pragma once

#include <grpcpp/support/status.h>

#include <chrono>
#include <cstdint>
#include <functional>
#include <memory>
#include <string>
#include <vector>

#include "steelyard/v1/service.grpc.pb.h"

namespace steelyard::client {

struct FeedOptions {
  std::string rig;
  std::string source;
  std::vector<std::string> channels;  ///< Batch.channel is an index into these
  /// Readings sent and not yet taken; beyond it send() waits. One batch is always let through.
  std::size_t most_in_flight = 131'072;
  /// Called for each refused reading that the service lists, on a thread of the feed's; must not call the
  /// feed.
  std::function<void(const v1::Refused&)> on_refused{};
  /// Called when a lost connection is noticed (with the reason) and again with OK when it is back, on the
  /// thread that is in open, send or finish; must not call the feed.
  std::function<void(const grpc::Status&)> on_break{};
};

struct FeedProgress {
  std::uint64_t next_sequence = 1;  ///< where the service said to go on when the feed was last opened
  std::uint64_t taken = 0;          ///< sequence number up to which everything has been dealt with
  std::uint64_t kept = 0;           ///< the same for the disk; stays 0 while the service has no journal
  std::uint64_t refused = 0;        ///< readings refused, over all breaks
  std::uint64_t repeated = 0;       ///< readings that the service had dealt with before
  std::uint64_t breaks = 0;         ///< connections lost so far
  std::vector<std::string>
      unknown_channels;               ///< names that the rig does not have; their readings are refused
  std::vector<v1::Refused> refusals;  ///< the first 100 of them
};

/// open, send and finish are called by one thread at a time; progress() and cancel() by any.
class Feed {
 public:
  Feed(std::shared_ptr<v1::Steelyard::Stub> stub, FeedOptions options, std::chrono::milliseconds patience);
  /// Cancels what is still under way.
  ~Feed();
  Feed(const Feed&) = delete;
  Feed& operator=(const Feed&) = delete;

  /// Opens and waits for the service to say where to go on. Tries again for as long as the patience lasts if
  /// the service is away; any other error is final.
  [[nodiscard]] grpc::Status open();

  /// Sends a batch (at most 65536 rows; sequence numbers above all sent before). Waits while too much is in
  /// flight, and through breaks as long as the patience lasts. After an error the feed is over.
  [[nodiscard]] grpc::Status send(v1::Batch batch);

  /// Waits until everything sent is taken, and closes. OK: it is.
  [[nodiscard]] grpc::Status finish();

  /// Makes a waiting open, send or finish return CANCELLED soon.
  void cancel();

  [[nodiscard]] FeedProgress progress() const;

 private:
  class Impl;
  std::unique_ptr<Impl> impl_;
};

}  // namespace steelyard::client
