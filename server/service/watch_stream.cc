// SPDX-License-Identifier: Apache-2.0
// Writing and ending of one watch.
#include "service/watch_stream.h"

#include <spdlog/fmt/fmt.h>

#include <chrono>
#include <cmath>

#include "service/status.h"

namespace steelyard::service {
namespace {

grpc::Status check_rate(const char* field, double rate_hz, double most_hz) {
  if (std::isfinite(rate_hz) && rate_hz >= 0.0 && rate_hz <= most_hz) return grpc::Status::OK;
  return make_status(Error::kWrongRequest,
                     fmt::format("{}: is {}; must be over 0 and at most {}", field, rate_hz, most_hz));
}

SteadyTime::duration interval_of(double rate_hz) {
  // A rate below one a day is as good as one a day, and keeps sums of times in range.
  constexpr double kLongestS = 86'400.0;
  const std::chrono::duration<double> seconds(std::min(1.0 / rate_hz, kLongestS));
  return std::chrono::duration_cast<SteadyTime::duration>(seconds);
}

grpc::Status read_pace(const v1::WatchRequest& request, const Limits& limits, Pace& pace) {
  const double most_hz = limits.watch_rate_hz;
  if (auto status = check_rate("max_rate_hz", request.max_rate_hz(), most_hz); !status.ok()) return status;
  if (auto status = check_rate("fixed_rate_hz", request.fixed_rate_hz(), most_hz); !status.ok())
    return status;
  const int asked = (request.max_rate_hz() > 0.0) + (request.fixed_rate_hz() > 0.0) + request.every_moment();
  if (asked > 1) {
    return make_status(
        Error::kWrongRequest,
        fmt::format("max_rate_hz, fixed_rate_hz, every_moment: {} of them are set; at most one may be",
                    asked));
  }
  if (request.every_moment()) {
    pace.kind = Pace::Kind::kEveryMoment;
  } else if (request.fixed_rate_hz() > 0.0) {
    pace = {Pace::Kind::kFixedRate, interval_of(request.fixed_rate_hz())};
  } else {
    const double rate_hz = request.max_rate_hz() > 0.0 ? request.max_rate_hz() : kDefaultWatchRateHz;
    pace = {Pace::Kind::kOnChange, interval_of(rate_hz)};
  }
  return grpc::Status::OK;
}

}  // namespace

WatchStream* WatchStream::start(Registry& registry, const Limits& limits, const v1::WatchRequest& request) {
  auto stream = std::make_shared<WatchStream>(limits);
  stream->self_ = stream;
  if (auto status = stream->open(registry, request); !status.ok()) stream->end(status);
  return stream.get();
}

grpc::Status WatchStream::open(Registry& registry, const v1::WatchRequest& request) {
  Pace pace;
  if (auto status = read_pace(request, limits_, pace); !status.ok()) return status;
  every_moment_ = request.every_moment();
  grpc::Status status;
  host_ = registry.find(request.rig(), status);
  if (!host_) return status;
  return host_->open_watch(shared_from_this(), pace);
}

void WatchStream::offer(std::shared_ptr<const v1::Moment> moment, std::uint64_t beat) {
  const std::lock_guard lock(mutex_);
  if (finished_ || end_) return;
  if (!every_moment_) waiting_.clear();
  waiting_.push_back({std::move(moment), beat});
  write();
}

std::size_t WatchStream::backlog() const {
  const std::lock_guard lock(mutex_);
  return waiting_.size();
}

void WatchStream::end(const grpc::Status& status) {
  const std::lock_guard lock(mutex_);
  if (!end_) end_ = status;
  finish_if_due();
}

void WatchStream::write() {
  if (writing_ || waiting_.empty() || finished_ || cancelled_) return finish_if_due();
  const Update& update = waiting_.front();
  message_.set_beat(update.beat);
  message_.set_missed(update.beat - last_beat_ - 1);
  *message_.mutable_moment() = *update.moment;
  last_beat_ = update.beat;
  waiting_.pop_front();
  writing_ = true;
  StartWrite(&message_);
}

void WatchStream::OnWriteDone(bool ok) {
  bool wake = false;
  {
    const std::lock_guard lock(mutex_);
    writing_ = false;
    if (!ok) {
      cancelled_ = true;
      waiting_.clear();
      if (!end_) end_ = grpc::Status(grpc::StatusCode::CANCELLED, "the reader went away");
    }
    write();
    wake = every_moment_ && (!ok || waiting_.size() == limits_.moments_waiting / 2);
  }
  if (wake) host_->wake();
}

void WatchStream::finish_if_due() {
  if (finished_ || writing_ || !end_ || (!waiting_.empty() && !cancelled_)) return;
  finished_ = true;
  Finish(*end_);
}

void WatchStream::OnCancel() {
  {
    const std::lock_guard lock(mutex_);
    cancelled_ = true;
    waiting_.clear();
    if (!end_) end_ = grpc::Status(grpc::StatusCode::CANCELLED, "the reader went away");
    finish_if_due();
  }
  if (host_) host_->wake();
}

void WatchStream::OnDone() {
  std::shared_ptr<WatchStream> last;
  std::shared_ptr<Host> host;
  {
    const std::lock_guard lock(mutex_);  // as in FeedStream::OnDone
    last = std::move(self_);
    host = std::move(host_);
  }
  if (host) host->close_watch(last);
}

}  // namespace steelyard::service
