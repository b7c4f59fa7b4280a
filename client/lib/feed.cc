// SPDX-License-Identifier: Apache-2.0
// A feed over one connection after another. What has not been taken is held here and sent again after a
// break; the service recognises what it has dealt with before.
#include "lib/feed.h"

#include <grpcpp/client_context.h>

#include <algorithm>
#include <condition_variable>
#include <deque>
#include <mutex>
#include <thread>
#include <utility>

#include "lib/clock.h"

namespace steelyard::client {
namespace {

using Stream = grpc::ClientReaderWriter<v1::FeedRequest, v1::FeedResponse>;

constexpr std::size_t kMostRefusalsHeld = 100;
constexpr std::chrono::milliseconds kFirstBackOff{100};
constexpr std::chrono::milliseconds kLongestBackOff{3'000};

/// A lost connection shows as any of these; all others are the service's verdict.
bool is_break(const grpc::Status& status) {
  switch (status.error_code()) {
    case grpc::StatusCode::OK:  // the service never ends a feed first with OK
    case grpc::StatusCode::UNAVAILABLE:
    case grpc::StatusCode::UNKNOWN:
    case grpc::StatusCode::INTERNAL:
    case grpc::StatusCode::CANCELLED:
      return true;
    default:
      return false;
  }
}

std::size_t rows_of(const v1::Batch& batch) { return static_cast<std::size_t>(batch.value_size()); }
std::uint64_t last_of(const v1::Batch& batch) { return batch.first_sequence() + rows_of(batch) - 1; }

}  // namespace

class Feed::Impl {
 public:
  Impl(std::shared_ptr<v1::Steelyard::Stub> stub, FeedOptions options, std::chrono::milliseconds patience)
      : stub_(std::move(stub)), options_(std::move(options)), patience_(patience) {}
  ~Impl() {
    cancel();
    hang_up();
  }

  grpc::Status open();
  grpc::Status send(v1::Batch batch);
  grpc::Status finish();
  void cancel();
  FeedProgress progress() const {
    const std::lock_guard lock(mutex_);
    return progress_;
  }

 private:
  /// One connection: opening sent, answer awaited.
  grpc::Status dial(SteadyTime give_up);
  /// Ends the connection, if there is one.
  void hang_up();
  /// Connects, as often as it takes while the patience lasts, and sends what is held.
  grpc::Status connect_and_resend();
  /// After a break: reports it, connects again.
  grpc::Status recover();
  grpc::Status resend();
  /// False: the connection has ended or is about to; wait_for_end() says why.
  bool write(const v1::FeedRequest& request);
  grpc::Status wait_for_end();
  void read_answers();
  void take_answer(v1::FeedResponse& answer);
  void drop_taken();  // mutex held
  grpc::Status wait_before_retry(std::chrono::milliseconds& back_off, SteadyTime give_up);

  const std::shared_ptr<v1::Steelyard::Stub> stub_;
  const FeedOptions options_;
  const std::chrono::milliseconds patience_;

  mutable std::mutex mutex_;
  std::condition_variable changed_;
  FeedProgress progress_;
  std::uint64_t refused_before_ = 0;   // over the connections before this one
  std::uint64_t repeated_before_ = 0;  // likewise
  std::deque<v1::Batch> held_;         // sent or to be sent, not taken
  std::size_t held_rows_ = 0;
  bool opened_ = false;  // on this connection
  bool broken_ = true;   // this connection has ended, `ended_` says why
  bool cancelled_ = false;
  grpc::Status ended_;

  std::mutex writing_;  // held while a write is under way, so that Finish never overlaps one
  std::shared_ptr<grpc::ClientContext> context_;  // guarded by mutex_ for cancel()
  std::unique_ptr<Stream> stream_;
  std::thread reader_;
};

grpc::Status Feed::Impl::dial(SteadyTime give_up) {
  hang_up();
  auto context = std::make_shared<grpc::ClientContext>();
  {
    const std::lock_guard lock(mutex_);
    if (cancelled_) return {grpc::StatusCode::CANCELLED, "the feed was cancelled"};
    context_ = context;
    opened_ = broken_ = false;
    refused_before_ = progress_.refused;
    repeated_before_ = progress_.repeated;
  }
  stream_ = stub_->Feed(context.get());
  reader_ = std::thread([this] { read_answers(); });
  v1::FeedRequest request;
  v1::Opening& opening = *request.mutable_opening();
  opening.set_rig(options_.rig);
  opening.set_source(options_.source);
  opening.mutable_channels()->Assign(options_.channels.begin(), options_.channels.end());
  write(request);
  std::unique_lock lock(mutex_);
  if (!changed_.wait_until(lock, give_up, [&] { return opened_ || broken_; })) {
    return {grpc::StatusCode::UNAVAILABLE, "the service does not answer the opening"};
  }
  return opened_ ? grpc::Status::OK : ended_;
}

void Feed::Impl::hang_up() {
  if (!stream_) return;
  context_->TryCancel();
  reader_.join();
  stream_.reset();
}

bool Feed::Impl::write(const v1::FeedRequest& request) {
  const std::lock_guard lock(writing_);
  return stream_->Write(request);
}

void Feed::Impl::read_answers() {
  v1::FeedResponse answer;
  while (stream_->Read(&answer)) take_answer(answer);
  grpc::Status status;
  {
    const std::lock_guard lock(writing_);
    status = stream_->Finish();
  }
  const std::lock_guard lock(mutex_);
  broken_ = true;
  ended_ = status;
  changed_.notify_all();
}

void Feed::Impl::take_answer(v1::FeedResponse& answer) {
  {
    const std::lock_guard lock(mutex_);
    if (answer.has_opened()) {
      opened_ = true;
      progress_.next_sequence = answer.opened().next_sequence();
      progress_.unknown_channels.assign(answer.opened().unknown_channels().begin(),
                                        answer.opened().unknown_channels().end());
    }
    progress_.taken = answer.taken();
    progress_.kept = answer.kept();
    progress_.refused = refused_before_ + answer.refused_total();
    progress_.repeated = repeated_before_ + answer.repeated_total();
    for (const v1::Refused& refused : answer.refused()) {
      if (progress_.refusals.size() < kMostRefusalsHeld) progress_.refusals.push_back(refused);
    }
    drop_taken();
    changed_.notify_all();
  }
  if (!options_.on_refused) return;
  for (const v1::Refused& refused : answer.refused()) options_.on_refused(refused);
}

void Feed::Impl::drop_taken() {
  while (!held_.empty() && last_of(held_.front()) <= progress_.taken) {
    held_rows_ -= rows_of(held_.front());
    held_.pop_front();
  }
}

grpc::Status Feed::Impl::wait_before_retry(std::chrono::milliseconds& back_off, SteadyTime give_up) {
  std::unique_lock lock(mutex_);
  const auto until = std::min(steady_now() + back_off, give_up);
  changed_.wait_until(lock, until, [&] { return cancelled_; });
  back_off = std::min(2 * back_off, kLongestBackOff);
  return cancelled_ ? grpc::Status(grpc::StatusCode::CANCELLED, "the feed was cancelled") : grpc::Status::OK;
}

grpc::Status Feed::Impl::resend() {
  std::deque<v1::Batch> held;
  {
    const std::lock_guard lock(mutex_);
    held = held_;
  }
  for (v1::Batch& batch : held) {
    v1::FeedRequest request;
    *request.mutable_batch() = std::move(batch);
    if (!write(request)) return wait_for_end();
  }
  return grpc::Status::OK;
}

grpc::Status Feed::Impl::wait_for_end() {
  std::unique_lock lock(mutex_);
  changed_.wait(lock, [&] { return broken_; });
  if (ended_.ok()) return {grpc::StatusCode::UNAVAILABLE, "the service has ended the feed"};
  return ended_;
}

grpc::Status Feed::Impl::connect_and_resend() {
  auto give_up = steady_now() + patience_;
  auto back_off = kFirstBackOff;
  std::uint64_t taken = progress().taken;
  for (;;) {
    grpc::Status status = dial(give_up);
    if (status.ok()) status = resend();
    if (status.ok()) return status;
    if (!is_break(status)) return status;
    if (const std::uint64_t now_taken = progress().taken; now_taken > taken) {  // it gets on, break by break
      taken = now_taken;
      give_up = steady_now() + patience_;
    }
    if (steady_now() >= give_up) return status;
    if (auto waited = wait_before_retry(back_off, give_up); !waited.ok()) return waited;
  }
}

grpc::Status Feed::Impl::recover() {
  grpc::Status reason;
  {
    const std::lock_guard lock(mutex_);
    if (cancelled_) return {grpc::StatusCode::CANCELLED, "the feed was cancelled"};
    reason = ended_;
    if (!is_break(reason)) return reason;
    ++progress_.breaks;
  }
  if (options_.on_break) options_.on_break(reason);
  grpc::Status status = connect_and_resend();
  if (status.ok() && options_.on_break) options_.on_break(status);
  return status;
}

grpc::Status Feed::Impl::open() { return connect_and_resend(); }

grpc::Status Feed::Impl::send(v1::Batch batch) {
  const std::size_t rows = rows_of(batch);
  if (rows == 0) return grpc::Status::OK;
  if (!stream_) return {grpc::StatusCode::FAILED_PRECONDITION, "the feed is not open"};
  for (;;) {
    {
      std::unique_lock lock(mutex_);
      changed_.wait(lock, [&] {
        return broken_ || cancelled_ || held_.empty() || held_rows_ + rows <= options_.most_in_flight;
      });
      if (cancelled_) return {grpc::StatusCode::CANCELLED, "the feed was cancelled"};
      if (!broken_) {
        held_rows_ += rows;
        held_.push_back(batch);
        break;
      }
    }
    if (auto status = recover(); !status.ok()) return status;
  }
  v1::FeedRequest request;
  *request.mutable_batch() = std::move(batch);
  if (write(request)) return grpc::Status::OK;
  (void)wait_for_end();
  return recover();
}

grpc::Status Feed::Impl::finish() {
  if (!stream_) return {grpc::StatusCode::FAILED_PRECONDITION, "the feed is not open"};
  for (;;) {
    {
      std::unique_lock lock(mutex_);
      changed_.wait(lock, [&] { return broken_ || cancelled_ || held_.empty(); });
      if (held_.empty()) break;
      if (cancelled_) return {grpc::StatusCode::CANCELLED, "the feed was cancelled"};
    }
    if (auto status = recover(); !status.ok()) return status;
  }
  {
    const std::lock_guard lock(writing_);
    stream_->WritesDone();
  }
  // Everything is taken: how the connection ends does not matter any more, but it is given time to end in
  // order.
  std::unique_lock lock(mutex_);
  changed_.wait_for(lock, patience_, [&] { return broken_ || cancelled_; });
  lock.unlock();
  hang_up();
  return grpc::Status::OK;
}

void Feed::Impl::cancel() {
  const std::lock_guard lock(mutex_);
  cancelled_ = true;
  if (context_) context_->TryCancel();
  changed_.notify_all();
}

Feed::Feed(std::shared_ptr<v1::Steelyard::Stub> stub, FeedOptions options, std::chrono::milliseconds patience)
    : impl_(std::make_unique<Impl>(std::move(stub), std::move(options), patience)) {}
Feed::~Feed() = default;

grpc::Status Feed::open() { return impl_->open(); }
grpc::Status Feed::send(v1::Batch batch) { return impl_->send(std::move(batch)); }
grpc::Status Feed::finish() { return impl_->finish(); }
void Feed::cancel() { impl_->cancel(); }
FeedProgress Feed::progress() const { return impl_->progress(); }

}  // namespace steelyard::client
