// SPDX-License-Identifier: Apache-2.0
// What a rig's worker says to the streams of its callers. The streams implement these; no gRPC here, so that
// everything behind them can be tested without a connection. All calls come from the rig's worker and return
// at once.
#pragma once

#include <grpcpp/support/status.h>

#include <cstddef>
#include <cstdint>
#include <memory>
#include <vector>

#include "steelyard/v1/estimates.pb.h"
#include "steelyard/v1/readings.pb.h"

namespace steelyard::service {

/// What became of one message of a feed.
struct Dealt {
  std::uint64_t taken = 0;           ///< the source's position
  std::vector<v1::Refused> refused;  ///< of this message, the first ones
  std::uint64_t refused_total = 0;   ///< since the feed was opened
  std::uint64_t repeated_total = 0;  ///< since the feed was opened
};

class FeedSession {
 public:
  virtual ~FeedSession() = default;
  /// The opening was accepted (or the rig has changed, then no message is answered).
  virtual void opened(v1::Opened opened, std::uint64_t taken, bool answers_message) = 0;
  /// One message was dealt with.
  virtual void dealt(Dealt dealt) = 0;
  /// The mailbox has room: read on.
  virtual void room() = 0;
  /// Nothing more is taken from this feed.
  virtual void end(const grpc::Status& status) = 0;
};

class WatchSession {
 public:
  virtual ~WatchSession() = default;
  virtual void offer(std::shared_ptr<const v1::Moment> moment, std::uint64_t beat) = 0;
  /// Updates not yet given to the network.
  [[nodiscard]] virtual std::size_t backlog() const = 0;
  virtual void end(const grpc::Status& status) = 0;
};

}  // namespace steelyard::service
