// SPDX-License-Identifier: Apache-2.0
// The workers' loop: jobs in turn, timers between them.
#include "service/worker.h"

#include <algorithm>

namespace steelyard::service {

Worker::Worker(const Clock& clock) : clock_(clock), thread_([this] { loop(); }) {}

Worker::~Worker() {
  {
    const std::lock_guard lock(mutex_);
    stop_ = true;
  }
  wake_.notify_all();
  thread_.join();
}

void Worker::wake(const std::shared_ptr<Job>& job) {
  {
    const std::lock_guard lock(mutex_);
    push(job);
  }
  wake_.notify_one();
}

void Worker::push(const std::shared_ptr<Job>& job) {
  if (job->queued_) return;
  job->queued_ = true;
  ready_.push_back(job);
}

void Worker::loop() {
  std::unique_lock lock(mutex_);
  while (!stop_) {
    collect_due();
    if (ready_.empty()) {
      if (timers_.empty()) {
        wake_.wait(lock);
      } else {
        // A copy: wake_until reads its argument again after the lock was given up.
        const SteadyTime due = timers_.begin()->first;
        wake_.wait_until(lock, due);
      }
      continue;
    }
    const std::shared_ptr<Job> job = ready_.front();
    ready_.pop_front();
    job->queued_ = false;  // a wake from now on runs it once more
    lock.unlock();
    const Job::Next next = job->run();
    lock.lock();
    if (next.more) push(job);
    if (next.due) arm(job, *next.due);
  }
}

void Worker::collect_due() {
  if (timers_.empty()) return;
  const SteadyTime now = clock_.steady();
  while (!timers_.empty() && timers_.begin()->first <= now) {
    const auto first = timers_.begin();
    const std::shared_ptr<Job> job = first->second;
    if (job->armed_ == first->first) {
      job->armed_.reset();
      push(job);
    }
    timers_.erase(first);
  }
}

void Worker::arm(const std::shared_ptr<Job>& job, SteadyTime due) {
  if (job->armed_ && *job->armed_ <= due) return;  // runs earlier anyway, and says anew when it is due
  if (job->armed_) {
    auto [entry, end] = timers_.equal_range(*job->armed_);
    entry = std::find_if(entry, end, [&](const auto& timer) { return timer.second == job; });
    if (entry != end) timers_.erase(entry);
  }
  job->armed_ = due;
  timers_.emplace(due, job);
}

WorkerPool::WorkerPool(const Clock& clock, std::size_t threads) {
  for (std::size_t i = 0; i < std::max<std::size_t>(1, threads); ++i) {
    workers_.push_back(std::make_unique<Worker>(clock));
  }
}

Worker& WorkerPool::next() {
  const std::lock_guard lock(mutex_);
  turn_ = (turn_ + 1) % workers_.size();
  return *workers_[turn_];
}

}  // namespace steelyard::service
