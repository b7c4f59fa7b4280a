// SPDX-License-Identifier: Apache-2.0
// A rig in the service: its mailbox, which any thread fills, and what its worker does with it. Readings wait
// in order; questions (estimates, openings of watches, changes of the rig) are answered between two chunks of
// readings, so they never wait for a full mailbox.
//
// A full mailbox drops nothing: post() says that the feed must stop reading, and the feed's room() is called
// when the mailbox is half empty again. gRPC's flow control then holds up the source.
#pragma once

#include <deque>
#include <exception>
#include <functional>
#include <memory>
#include <mutex>
#include <optional>
#include <string>
#include <variant>
#include <vector>

#include "service/feeds.h"
#include "service/watches.h"
#include "service/worker.h"

namespace steelyard::service {

struct OpenFeed {
  std::string source;
  std::vector<std::string> channels;
};
struct CloseFeed {};
/// From `feed`, in its order.
struct FeedMessage {
  std::shared_ptr<FeedSession> feed;
  std::variant<OpenFeed, Rows, CloseFeed> content;
};

class Host final : public Job, public std::enable_shared_from_this<Host> {
 public:
  /// All references must outlive the host.
  Host(Worker& worker, const Clock& clock, const Limits& limits, std::shared_ptr<const rig::Rig> rig,
       std::uint64_t revision);

  /// Any thread. False: the mailbox is full; read no more until the feed's room() is called.
  [[nodiscard]] bool post(FeedMessage message);

  /// Answers whatever happens and throws nothing. The machine is null if the rig has ended; `ended` says why.
  using Question = std::function<void(Machine* machine, const grpc::Status& ended)>;
  /// Any thread. Asks between two chunks of readings, in order; kLimit if too many wait.
  [[nodiscard]] grpc::Status ask(Question question);

  /// Any thread; these cannot be refused.
  void change(std::shared_ptr<const rig::Rig> rig, std::uint64_t revision, bool restart);
  void end_now(const grpc::Status& status);
  /// After all that is in the mailbox now.
  void end_when_empty(const grpc::Status& status);
  void close_watch(const std::shared_ptr<WatchSession>& session);
  void wake() { worker_.wake(shared_from_this()); }

  /// Any thread.
  [[nodiscard]] grpc::Status open_watch(const std::shared_ptr<WatchSession>& session, const Pace& pace);

 private:
  using Urgent = std::function<void()>;

  Next run() override;
  [[nodiscard]] Next run_piece();
  /// After a defect of ours, which must end neither the process nor the other rigs.
  void fail(const std::exception& error);
  void push_urgent(Urgent urgent);
  void run_urgent();
  /// Takes the next message from the mailbox; false if there is none.
  bool take_message();
  void handle(FeedMessage message);
  void end(const grpc::Status& status);
  /// Feeds that stopped reading may go on; mutex held.
  [[nodiscard]] std::vector<std::shared_ptr<FeedSession>> take_waiting();
  [[nodiscard]] bool full() const;  // mutex held

  Worker& worker_;
  const Clock& clock_;
  const Limits& limits_;

  // Any thread.
  std::mutex mutex_;
  std::deque<FeedMessage> mailbox_;
  std::size_t readings_ = 0;  // in the mailbox
  std::vector<std::shared_ptr<FeedSession>> waiting_;
  std::deque<Urgent> urgent_;
  std::optional<grpc::Status> end_when_empty_;

  // The worker's thread alone.
  Machine machine_;
  FeedDesk feeds_;
  WatchDesk watches_;
  std::optional<grpc::Status> ended_;
};

}  // namespace steelyard::service
