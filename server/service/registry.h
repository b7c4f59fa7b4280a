// SPDX-License-Identifier: Apache-2.0
// The rigs of the service by name, with their revisions. Safe to use from any thread.
#pragma once

#include <grpcpp/support/status.h>

#include <cstdint>
#include <deque>
#include <map>
#include <memory>
#include <mutex>
#include <optional>
#include <string>
#include <vector>

#include "service/host.h"
#include "service/limits.h"
#include "service/worker.h"
#include "steelyard/v1/service.pb.h"

namespace steelyard::service {

/// A rig file that is put.
struct Put {
  std::string text;
  std::string file_name;
  bool dry_run = false;
  std::string author;
  std::string reason;
};

struct PutResult {
  grpc::Status status;  ///< kWrongDescription: `problems` lists why
  std::vector<rig::Problem> problems;
  std::string name;
  std::uint64_t revision = 0;
  v1::RigChange change;
};

class Registry {
 public:
  /// All references must outlive the registry.
  Registry(WorkerPool& workers, const Clock& clock, const Limits& limits);

  [[nodiscard]] PutResult put(const Put& request);
  /// kNoSuchRig also for a revision that is not there (any more).
  [[nodiscard]] grpc::Status get(const std::string& name, std::uint64_t revision,
                                 v1::GetRigResponse& answer) const;
  void list(const v1::ListRigsRequest& request, v1::ListRigsResponse& answer) const;
  [[nodiscard]] grpc::Status remove(const std::string& name, const std::string& author,
                                    const std::string& reason);

  /// Null, and `status` says why, if there is no such rig or the service is stopping.
  [[nodiscard]] std::shared_ptr<Host> find(const std::string& name, grpc::Status& status) const;

  /// Refuses everything from now on; every rig ends its streams when its mailbox is empty.
  void stop();

 private:
  struct Revision {
    std::uint64_t number = 0;
    std::shared_ptr<const rig::Rig> rig;
    v1::Rig message;
    std::string text;
    std::string author;
    std::string reason;
    engine::TimeNs put_time_ns = 0;
  };
  struct Entry {
    std::shared_ptr<Host> host;
    std::deque<Revision> revisions;  // the last one is in force; never empty
  };

  /// Loads, checks and turns into a revision without a number; or says why not.
  [[nodiscard]] PutResult prepare(const Put& request, Revision& revision) const;
  void put_new(Revision revision, PutResult& result, bool dry_run);                  // mutex held
  void put_again(Entry& entry, Revision revision, PutResult& result, bool dry_run);  // mutex held

  WorkerPool& workers_;
  const Clock& clock_;
  const Limits& limits_;
  mutable std::mutex mutex_;
  std::map<std::string, Entry, std::less<>> rigs_;
  bool stopping_ = false;
};

/// "3 problems:" and one line each, as far as `most_bytes` reach, then how many more there are.
[[nodiscard]] std::string list_problems(const std::vector<rig::Problem>& problems, std::size_t most_bytes);

}  // namespace steelyard::service
