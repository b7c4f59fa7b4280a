// SPDX-License-Identifier: Apache-2.0
// One Watch call on gRPC's callback API. While a write is under way the newest update waits, and replaces the
// one that waited before (counted as missed by the reader); for a watch of every moment all wait, see
// WatchDesk::blocked.
#pragma once

#include <grpcpp/support/server_callback.h>

#include <deque>
#include <memory>
#include <mutex>
#include <optional>

#include "service/host.h"
#include "service/registry.h"
#include "service/sessions.h"
#include "steelyard/v1/service.pb.h"

namespace steelyard::service {

class WatchStream final : public grpc::ServerWriteReactor<v1::WatchResponse>,
                          public WatchSession,
                          public std::enable_shared_from_this<WatchStream> {
 public:
  /// Starts it; it keeps itself alive until gRPC is done with it.
  [[nodiscard]] static WatchStream* start(Registry& registry, const Limits& limits,
                                          const v1::WatchRequest& request);

  explicit WatchStream(const Limits& limits) : limits_(limits) {}

  // From gRPC.
  void OnWriteDone(bool ok) override;
  void OnCancel() override;
  void OnDone() override;

  // From the rig's worker.
  void offer(std::shared_ptr<const v1::Moment> moment, std::uint64_t beat) override;
  [[nodiscard]] std::size_t backlog() const override;
  void end(const grpc::Status& status) override;

 private:
  struct Update {
    std::shared_ptr<const v1::Moment> moment;
    std::uint64_t beat = 0;
  };

  [[nodiscard]] grpc::Status open(Registry& registry, const v1::WatchRequest& request);
  void write();          // mutex held
  void finish_if_due();  // mutex held

  const Limits& limits_;
  std::shared_ptr<WatchStream> self_;
  std::shared_ptr<Host> host_;
  bool every_moment_ = false;

  mutable std::mutex mutex_;
  std::deque<Update> waiting_;  // one at most, save for a watch of every moment
  v1::WatchResponse message_;
  std::uint64_t last_beat_ = 0;
  bool writing_ = false;
  bool finished_ = false;
  bool cancelled_ = false;
  std::optional<grpc::Status> end_;
};

}  // namespace steelyard::service
