// SPDX-License-Identifier: Apache-2.0
// A small pool of threads for many rigs. Each rig is pinned to one worker, so what belongs to a rig is
// touched by one thread alone and needs no lock. (One thread a rig would be too many for thousands of rigs.)
#pragma once

#include <condition_variable>
#include <cstddef>
#include <deque>
#include <map>
#include <memory>
#include <mutex>
#include <optional>
#include <thread>
#include <vector>

#include "service/clock.h"

namespace steelyard::service {

/// Something that a worker runs in small pieces.
class Job {
 public:
  virtual ~Job() = default;

  struct Next {
    bool more = false;              ///< run again as soon as others have had their turn
    std::optional<SteadyTime> due;  ///< else run again at this time
  };
  /// One piece, on the worker's thread. Must not throw.
  virtual Next run() = 0;

 private:
  friend class Worker;
  bool queued_ = false;              // guarded by the worker's mutex
  std::optional<SteadyTime> armed_;  // worker's thread alone: the timer in force
};

/// One thread. Its queue holds each job at most once, so it is bounded by the number of jobs.
class Worker {
 public:
  explicit Worker(const Clock& clock);
  /// Ends the thread after the piece that is running; what waits is left undone.
  ~Worker();
  Worker(const Worker&) = delete;
  Worker& operator=(const Worker&) = delete;

  /// Has the job run soon. Any thread.
  void wake(const std::shared_ptr<Job>& job);

 private:
  void loop();
  void push(const std::shared_ptr<Job>& job);  // mutex held
  void collect_due();                          // mutex held
  void arm(const std::shared_ptr<Job>& job, SteadyTime due);

  const Clock& clock_;
  std::mutex mutex_;
  std::condition_variable wake_;
  std::deque<std::shared_ptr<Job>> ready_;                  // guarded by mutex_
  bool stop_ = false;                                       // guarded by mutex_
  std::multimap<SteadyTime, std::shared_ptr<Job>> timers_;  // worker's thread alone
  std::thread thread_;
};

/// Hands out workers in turn.
class WorkerPool {
 public:
  WorkerPool(const Clock& clock, std::size_t threads);
  /// The worker that the next rig is pinned to. Any thread; lives as long as the pool.
  [[nodiscard]] Worker& next();

 private:
  std::mutex mutex_;
  std::size_t turn_ = 0;  // guarded by mutex_
  std::vector<std::unique_ptr<Worker>> workers_;
};

}  // namespace steelyard::service
