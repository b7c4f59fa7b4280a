// SPDX-License-Identifier: Apache-2.0
// Reading, answering and ending of one feed.
#include "service/feed_stream.h"

#include <spdlog/fmt/fmt.h>

#include <utility>

#include "service/rows.h"
#include "service/status.h"

namespace steelyard::service {

FeedStream* FeedStream::start(Registry& registry, const Limits& limits) {
  auto stream = std::make_shared<FeedStream>(registry, limits);
  stream->self_ = stream;
  const std::lock_guard lock(stream->mutex_);
  stream->read();
  return stream.get();
}

void FeedStream::read() {
  if (!finished_ && !end_) StartRead(&request_);
}

void FeedStream::OnReadDone(bool ok) {
  grpc::Status status;
  if (ok) {
    status = take_request();
    if (status.ok()) return;
  } else if (!host_) {
    status = make_status(Error::kWrongRequest, "opening: is missing; must be the first message of a feed");
  }
  const std::lock_guard lock(mutex_);
  reads_done_ = true;
  if (!status.ok() && !end_) end_ = status;
  finish_if_due();
}

grpc::Status FeedStream::take_request() {
  Rows rows;
  grpc::Status status;
  switch (request_.content_case()) {
    case v1::FeedRequest::kOpening:
      return open(request_.opening());
    case v1::FeedRequest::kBatch:
      status = to_rows(request_.batch(), limits_, rows);
      break;
    case v1::FeedRequest::kReading:
      status = to_rows(request_.reading(), rows);
      break;
    case v1::FeedRequest::CONTENT_NOT_SET:
      status =
          make_status(Error::kWrongRequest, "content: is empty; must be an opening, a batch or a reading");
  }
  if (status.ok()) status = check_open();
  if (status.ok()) post({shared_from_this(), std::move(rows)});
  return status;
}

grpc::Status FeedStream::check_open() const {
  if (host_) return grpc::Status::OK;
  return make_status(Error::kWrongRequest, "opening: is missing; must be the first message of a feed");
}

grpc::Status FeedStream::open(const v1::Opening& opening) {
  if (host_) return make_status(Error::kWrongRequest, "opening: came twice; must be the first message alone");
  if (opening.source().empty() || opening.source().size() > limits_.name_bytes) {
    return make_status(Error::kWrongRequest, fmt::format("opening.source: has {} bytes; must have 1 to {}",
                                                         opening.source().size(), limits_.name_bytes));
  }
  const auto channels = static_cast<std::size_t>(opening.channels_size());
  if (channels > limits_.feed_channels) {
    return make_status(Error::kWrongRequest,
                       fmt::format("opening.channels: has {} names; at most {} are allowed", channels,
                                   limits_.feed_channels));
  }
  grpc::Status status;
  host_ = registry_.find(opening.rig(), status);
  if (!host_) return status;
  OpenFeed open{opening.source(), {opening.channels().begin(), opening.channels().end()}};
  post({shared_from_this(), std::move(open)});
  return grpc::Status::OK;
}

void FeedStream::post(FeedMessage message) {
  {
    const std::lock_guard lock(mutex_);
    ++in_mailbox_;
  }
  if (!host_->post(std::move(message))) return;  // room() reads on
  const std::lock_guard lock(mutex_);
  read();
}

void FeedStream::room() {
  const std::lock_guard lock(mutex_);
  read();
}

void FeedStream::opened(v1::Opened opened, std::uint64_t taken, bool answers_message) {
  const std::lock_guard lock(mutex_);
  *pending_.mutable_opened() = std::move(opened);
  pending_.set_taken(taken);
  has_pending_ = true;
  if (answers_message) --in_mailbox_;
  write();
}

void FeedStream::dealt(Dealt dealt) {
  const std::lock_guard lock(mutex_);
  --in_mailbox_;
  pending_.set_taken(dealt.taken);
  pending_.set_refused_total(dealt.refused_total);
  pending_.set_repeated_total(dealt.repeated_total);
  for (v1::Refused& refused : dealt.refused) {
    if (static_cast<std::size_t>(pending_.refused_size()) >= limits_.refused_listed) break;
    *pending_.add_refused() = std::move(refused);
  }
  has_pending_ = true;
  write();
}

void FeedStream::end(const grpc::Status& status) {
  const std::lock_guard lock(mutex_);
  if (!end_) end_ = status;
  finish_if_due();
}

void FeedStream::write() {
  if (writing_ || !has_pending_ || finished_ || cancelled_) return finish_if_due();
  std::swap(writing_message_, pending_);
  // The totals and the position stand in every answer.
  pending_.Clear();
  pending_.set_taken(writing_message_.taken());
  pending_.set_refused_total(writing_message_.refused_total());
  pending_.set_repeated_total(writing_message_.repeated_total());
  has_pending_ = false;
  writing_ = true;
  StartWrite(&writing_message_);
}

void FeedStream::OnWriteDone(bool ok) {
  const std::lock_guard lock(mutex_);
  writing_ = false;
  if (!ok) cancelled_ = true;
  if (!ok && !end_) end_ = grpc::Status(grpc::StatusCode::CANCELLED, "the source went away");
  write();
}

void FeedStream::finish_if_due() {
  if (finished_ || writing_ || (has_pending_ && !cancelled_)) return;
  if (end_) {
    finished_ = true;
    Finish(*end_);
  } else if (reads_done_ && in_mailbox_ == 0) {
    finished_ = true;
    Finish(grpc::Status::OK);
  }
}

void FeedStream::OnCancel() {
  const std::lock_guard lock(mutex_);
  cancelled_ = true;
  if (!end_) end_ = grpc::Status(grpc::StatusCode::CANCELLED, "the source went away");
  finish_if_due();
}

void FeedStream::OnDone() {
  std::shared_ptr<FeedStream> last;
  std::shared_ptr<Host> host;
  {
    const std::lock_guard lock(mutex_);  // what was done under it comes before the end of this object
    last = std::move(self_);
    // The mailbox may hold this feed for ever if the service ends: the feed must not hold its rig then.
    host = std::move(host_);
  }
  // Behind the readings that are still in the mailbox, which are run.
  if (host) (void)host->post({last, CloseFeed{}});
}

}  // namespace steelyard::service
