// SPDX-License-Identifier: Apache-2.0
// One Feed call on gRPC's callback API: reads while the mailbox has room, answers what was dealt with.
//
// Rules that gRPC aborts the process for, and how they are kept: one write at a time (`writing_`); nothing
// after Finish (`finished_`); both under the lock. Finish waits for the write under way.
#pragma once

#include <grpcpp/support/server_callback.h>

#include <memory>
#include <mutex>
#include <optional>

#include "service/host.h"
#include "service/registry.h"
#include "service/sessions.h"
#include "steelyard/v1/service.pb.h"

namespace steelyard::service {

class FeedStream final : public grpc::ServerBidiReactor<v1::FeedRequest, v1::FeedResponse>,
                         public FeedSession,
                         public std::enable_shared_from_this<FeedStream> {
 public:
  /// Starts it; it keeps itself alive until gRPC is done with it.
  [[nodiscard]] static FeedStream* start(Registry& registry, const Limits& limits);

  FeedStream(Registry& registry, const Limits& limits) : registry_(registry), limits_(limits) {}

  // From gRPC.
  void OnReadDone(bool ok) override;
  void OnWriteDone(bool ok) override;
  void OnCancel() override;
  void OnDone() override;

  // From the rig's worker.
  void opened(v1::Opened opened, std::uint64_t taken, bool answers_message) override;
  void dealt(Dealt dealt) override;
  void room() override;
  void end(const grpc::Status& status) override;

 private:
  /// Checks the message that was read and posts it; the status of a message that ends the feed.
  [[nodiscard]] grpc::Status take_request();
  [[nodiscard]] grpc::Status open(const v1::Opening& opening);
  [[nodiscard]] grpc::Status check_open() const;
  void post(FeedMessage message);
  void read();           // mutex held
  void write();          // mutex held: what is pending, if nothing is being written
  void finish_if_due();  // mutex held

  Registry& registry_;
  const Limits& limits_;
  std::shared_ptr<FeedStream> self_;

  // Only between a read's end and the next read's start.
  v1::FeedRequest request_;
  std::shared_ptr<Host> host_;

  std::mutex mutex_;
  v1::FeedResponse pending_;  // merged until the write under way is done
  bool has_pending_ = false;
  v1::FeedResponse writing_message_;
  bool writing_ = false;
  bool reads_done_ = false;
  bool finished_ = false;
  bool cancelled_ = false;
  std::size_t in_mailbox_ = 0;  // messages posted and not dealt with
  std::optional<grpc::Status> end_;
};

}  // namespace steelyard::service
