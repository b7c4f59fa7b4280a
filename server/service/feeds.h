// SPDX-License-Identifier: Apache-2.0
// The feeds of one rig, as its worker sees them: who is open, how far each source has come, and the message
// that is being run, in chunks. Belongs to one worker's thread.
//
// Exactly once: a source's sequence numbers rise, and its position is the last number dealt with. A number
// that is not above the position is a repeat and goes no further. Positions outlive feeds, changes of the rig
// and restarts of its posterior; the timeline, which forgets its own, therefore gets numbers counted here.
#pragma once

#include <cstdint>
#include <map>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "service/limits.h"
#include "service/machine.h"
#include "service/rows.h"
#include "service/sessions.h"

namespace steelyard::service {

class FeedDesk {
 public:
  FeedDesk(const Limits& limits, const Clock& clock) : limits_(limits), clock_(clock) {}

  /// Accepts the feed (an older one of the same source ends), or ends it with kLimit.
  void open(const std::shared_ptr<FeedSession>& session, const std::string& source,
            std::vector<std::string> names, Machine& machine);
  void close(const FeedSession* session);
  void end_all(const grpc::Status& status);

  /// Starts on a message of readings; busy() until run_chunk() has run all of them. Readings of a feed that
  /// is no longer open are dropped: it was told so, and their source sends them again. busy() must be false.
  void begin(const std::shared_ptr<FeedSession>& session, Rows message);
  [[nodiscard]] bool busy() const { return current_ != nullptr; }
  /// Runs the next readings, whole times only (see Limits::chunk_*).
  void run_chunk(Machine& machine, const timeline::Timeline::OnMoment& on_moment);

  /// After the machine has changed: looks all names up again and tells the feeds.
  void look_up_again(Machine& machine);

 private:
  struct Source {
    std::uint64_t position = 0;  // sequence number of the last reading dealt with
    std::uint64_t counted = 0;   // readings given to timelines
  };
  struct Feed {
    std::shared_ptr<FeedSession> session;
    std::string name;          // of the source
    Source* source = nullptr;  // in sources_, whose entries stay where they are
    std::uint32_t number = 0;  // of the source in the timeline
    std::vector<std::string> names;
    std::vector<std::optional<rig::Signal>> table;  // by name
    std::vector<std::uint32_t> parts;               // likewise; 1 for inputs and what is not known
    std::uint64_t refused_total = 0;
    std::uint64_t repeated_total = 0;
  };

  [[nodiscard]] v1::Opened describe(const Feed& feed, const Machine& machine) const;
  void look_up(Feed& feed, Machine& machine) const;
  void drop_repeats(Feed& feed);
  [[nodiscard]] std::size_t chunk_end() const;
  /// Into `readings_`, or refused.
  void sift(const Row& row, const Machine& machine);
  /// False: refused, since it does not have a value for each part, or not a finite one.
  [[nodiscard]] bool check_values(const Row& row);
  [[nodiscard]] timeline::Values values_of(const Row& row) const;
  void judge(const std::vector<timeline::Outcome>& outcomes, const Machine& machine);
  void refuse(std::uint64_t sequence, v1::RefusalReason reason, const std::string& message);
  void finish_message();

  const Limits& limits_;
  const Clock& clock_;
  std::map<const FeedSession*, Feed> feeds_;
  std::map<std::string, Source, std::less<>> sources_;  // by name; bounded by Limits::sources_per_rig

  // The message that is being run.
  const FeedSession* current_ = nullptr;
  std::vector<Row> rows_;            // sorted by time
  std::size_t done_ = 0;             // of them
  std::vector<double> more_values_;  // of them
  std::string misfit_;               // not empty: why none of them can be used
  std::uint64_t last_sequence_ = 0;
  std::vector<v1::Refused> refused_;

  // The chunk that is being run; storage is reused.
  std::vector<timeline::Reading> readings_;
  std::vector<Row> passed_;  // the rows of readings_, before the timeline sorts them
  std::uint64_t first_count_ = 0;
  std::vector<timeline::Outcome> outcomes_;
};

}  // namespace steelyard::service
