// SPDX-License-Identifier: Apache-2.0
// Positions of sources, refusals, and the way from rows to the timeline.
#include "service/feeds.h"

#include <spdlog/fmt/fmt.h>

#include <algorithm>
#include <cmath>

#include "service/status.h"

namespace steelyard::service {

void FeedDesk::open(const std::shared_ptr<FeedSession>& session, const std::string& source,
                    std::vector<std::string> names, Machine& machine) {
  const auto older = std::find_if(feeds_.begin(), feeds_.end(),
                                  [&](const auto& entry) { return entry.second.name == source; });
  if (older != feeds_.end()) {
    older->second.session->end(
        make_status(Error::kSourceTakenOver,
                    fmt::format("source: {} has opened another feed, which goes on instead", source)));
    feeds_.erase(older);
  }
  if (feeds_.size() >= limits_.feeds_per_rig) {
    session->end(make_status(Error::kLimit, fmt::format("rig {}: has {} feeds; no more are allowed",
                                                        machine.rig().name, feeds_.size())));
    return;
  }
  if (!sources_.contains(source) && sources_.size() >= limits_.sources_per_rig) {
    session->end(make_status(Error::kLimit, fmt::format("rig {}: has seen {} sources; no more are allowed",
                                                        machine.rig().name, sources_.size())));
    return;
  }
  Feed& feed = feeds_[session.get()];
  feed.session = session;
  feed.name = source;
  feed.source = &sources_[source];
  feed.names = std::move(names);
  look_up(feed, machine);
  session->opened(describe(feed, machine), feed.source->position, true);
}

void FeedDesk::close(const FeedSession* session) { feeds_.erase(session); }

void FeedDesk::end_all(const grpc::Status& status) {
  for (const auto& [key, feed] : feeds_) feed.session->end(status);
  feeds_.clear();
  current_ = nullptr;
}

void FeedDesk::look_up(Feed& feed, Machine& machine) const {
  feed.number = machine.source_number(feed.name);
  feed.table.clear();
  feed.parts.clear();
  for (const std::string& name : feed.names) {
    const std::optional<rig::Signal> signal = machine.rig().find(name);
    const bool is_channel = signal && !signal->is_input;
    const auto& channels = machine.rig().model->channels;
    const int parts = is_channel ? channels[static_cast<std::size_t>(signal->index)].parts() : 1;
    feed.table.push_back(signal);
    feed.parts.push_back(static_cast<std::uint32_t>(parts));
  }
}

v1::Opened FeedDesk::describe(const Feed& feed, const Machine& machine) const {
  v1::Opened opened;
  opened.set_next_sequence(feed.source->position + 1);
  opened.set_revision(machine.revision());
  for (std::size_t i = 0; i < feed.names.size(); ++i) {
    if (!feed.table[i]) opened.add_unknown_channels(feed.names[i]);
  }
  return opened;
}

void FeedDesk::look_up_again(Machine& machine) {
  for (auto& [key, feed] : feeds_) {
    look_up(feed, machine);
    feed.session->opened(describe(feed, machine), feed.source->position, false);
  }
}

void FeedDesk::begin(const std::shared_ptr<FeedSession>& session, Rows message) {
  const auto entry = feeds_.find(session.get());
  if (entry == feeds_.end()) return;
  current_ = session.get();
  const std::size_t wanted = share_out(message, entry->second.parts);
  misfit_.clear();
  if (wanted != message.more_values.size()) {
    misfit_ = fmt::format("batch.more_values: has {}; its rows of vector channels must have {} together",
                          message.more_values.size(), wanted);
  }
  rows_ = std::move(message.rows);
  more_values_ = std::move(message.more_values);
  done_ = 0;
  refused_.clear();
  last_sequence_ = rows_.empty() ? 0 : rows_.back().sequence;
  drop_repeats(entry->second);
  std::stable_sort(rows_.begin(), rows_.end(),
                   [](const Row& a, const Row& b) { return a.time_ns < b.time_ns; });
}

void FeedDesk::drop_repeats(Feed& feed) {
  const std::uint64_t position = feed.source->position;
  const auto fresh =
      std::find_if(rows_.begin(), rows_.end(), [&](const Row& row) { return row.sequence > position; });
  feed.repeated_total += static_cast<std::uint64_t>(fresh - rows_.begin());
  rows_.erase(rows_.begin(), fresh);
}

std::size_t FeedDesk::chunk_end() const {
  std::size_t moments = 0;
  for (std::size_t i = done_; i < rows_.size(); ++i) {
    const bool new_time = i == done_ || rows_[i].time_ns != rows_[i - 1].time_ns;
    if (new_time && (++moments > limits_.chunk_moments || i - done_ >= limits_.chunk_readings)) return i;
  }
  return rows_.size();
}

void FeedDesk::run_chunk(Machine& machine, const timeline::Timeline::OnMoment& on_moment) {
  const auto entry = feeds_.find(current_);
  if (entry == feeds_.end()) {  // closed meanwhile
    current_ = nullptr;
    return;
  }
  const std::size_t end = chunk_end();
  readings_.clear();
  passed_.clear();
  first_count_ = entry->second.source->counted + 1;
  for (; done_ < end; ++done_) sift(rows_[done_], machine);
  if (!readings_.empty()) {
    machine.run(readings_, outcomes_, on_moment);
    judge(outcomes_, machine);
  }
  if (done_ == rows_.size()) finish_message();
}

void FeedDesk::sift(const Row& row, const Machine& machine) {
  const Feed& feed = feeds_.at(current_);
  if (row.channel >= feed.table.size()) {
    return refuse(
        row.sequence, v1::UNKNOWN_CHANNEL,
        fmt::format("channel: is {}; the opening named {}, counted from 0", row.channel, feed.table.size()));
  }
  const std::string& name = feed.names[row.channel];
  const auto& signal = feed.table[row.channel];
  if (!signal) {
    return refuse(row.sequence, v1::UNKNOWN_CHANNEL,
                  fmt::format("{}: is no channel or input of rig {}", name, machine.rig().name));
  }
  if (!check_values(row)) return;
  if (row.quality < 0 || row.quality > static_cast<int>(engine::Quality::kSimulated)) {
    return refuse(row.sequence, v1::UNKNOWN_QUALITY,
                  fmt::format("{}: quality is {}; must be from 0 to 4", name, row.quality));
  }
  if (row.time_ns < kOldestTimeNs) {
    return refuse(row.sequence, v1::TOO_OLD,
                  fmt::format("{}: time is {} ns; must be at least {} ns", name, row.time_ns, kOldestTimeNs));
  }
  const std::int64_t now_ns = clock_.now_ns();
  if (row.time_ns > now_ns + limits_.ahead_ns) {
    return refuse(
        row.sequence, v1::TOO_FAR_AHEAD,
        fmt::format("{}: time is {} ns, {:.3f} s ahead of the service's clock; at most {} s are allowed",
                    name, row.time_ns, 1e-9 * static_cast<double>(row.time_ns - now_ns),
                    limits_.ahead_ns / 1'000'000'000));
  }
  readings_.push_back({row.time_ns, *signal, values_of(row), static_cast<engine::Quality>(row.quality),
                       feed.number, ++feed.source->counted});
  passed_.push_back(row);
}

bool FeedDesk::check_values(const Row& row) {
  const Feed& feed = feeds_.at(current_);
  const std::string& name = feed.names[row.channel];
  const std::uint32_t parts = feed.parts[row.channel];
  // The rig may have changed since the message was begun.
  if (!misfit_.empty() || row.more_count + 1 != parts) {
    refuse(row.sequence, v1::WRONG_PARTS,
           misfit_.empty() ? fmt::format("{}: has {} values; must have {}, one for each part", name,
                                         row.more_count + 1, parts)
                           : misfit_);
    return false;
  }
  // What a source calls bad may be any number.
  if (row.quality != v1::GOOD && row.quality != v1::UNCERTAIN) return true;
  const timeline::Values values = values_of(row);
  for (std::size_t i = 0; i < values.size(); ++i) {
    const double value = values.all()[i];
    if (std::isfinite(value)) continue;
    const std::string which = parts == 1 ? name : fmt::format("{}.{}", name, i + 1);
    refuse(row.sequence, v1::NOT_FINITE, fmt::format("{}: value is {}; must be finite", which, value));
    return false;
  }
  return true;
}

timeline::Values FeedDesk::values_of(const Row& row) const {
  timeline::Values values(row.value);
  for (std::uint32_t i = 0; i < row.more_count; ++i) values.add(more_values_[row.more_at + i]);
  return values;
}

void FeedDesk::judge(const std::vector<timeline::Outcome>& outcomes, const Machine& machine) {
  for (std::size_t i = 0; i < outcomes.size() && i < readings_.size(); ++i) {
    const Row& row = passed_[readings_[i].sequence - first_count_];
    const std::string& name = feeds_.at(current_).names[row.channel];
    if (outcomes[i] == timeline::Outcome::kNotFinite) {
      refuse(row.sequence, v1::NOT_FINITE, fmt::format("{}: value is {}; must be finite", name, row.value));
    } else if (outcomes[i] == timeline::Outcome::kTooOld) {
      refuse(row.sequence, v1::TOO_OLD,
             fmt::format("{}: time is {} ns; must not be before the rig's clock, {} ns", name, row.time_ns,
                         machine.clock_ns()));
    }
  }
}

void FeedDesk::refuse(std::uint64_t sequence, v1::RefusalReason reason, const std::string& message) {
  ++feeds_.at(current_).refused_total;
  if (refused_.size() >= limits_.refused_listed) return;
  v1::Refused& refused = refused_.emplace_back();
  refused.set_sequence(sequence);
  refused.set_reason(reason);
  refused.set_message(message);
}

void FeedDesk::finish_message() {
  Feed& feed = feeds_.at(current_);
  std::uint64_t& position = feed.source->position;
  position = std::max(position, last_sequence_);
  feed.session->dealt({position, std::move(refused_), feed.refused_total, feed.repeated_total});
  refused_.clear();
  rows_.clear();
  current_ = nullptr;
}

}  // namespace steelyard::service
