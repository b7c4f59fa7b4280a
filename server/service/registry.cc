// SPDX-License-Identifier: Apache-2.0
// Putting, listing and removing rigs.
#include "service/registry.h"

#include <spdlog/fmt/fmt.h>
#include <spdlog/spdlog.h>

#include <algorithm>

#include "service/describe.h"
#include "service/status.h"

namespace steelyard::service {
namespace {

grpc::Status no_such_rig(const std::string& name) {
  return make_status(Error::kNoSuchRig, fmt::format("rig: there is none of the name \"{}\"", name));
}

grpc::Status stopping() {
  return make_status(Error::kStopping, "the service is stopping; connect again later");
}

/// The timeline cannot go back yet, and a reading that is delayed always comes from the past.
grpc::Status refuse_delay(const rig::Rig& rig) {
  for (const engine::ChannelModel& channel : rig.model->channels) {
    if (channel.delay_s > 0.0) {
      return make_status(
          Error::kNotYetPossible,
          fmt::format("channels.{}.delay: is {}; the service cannot run a rig with a delay yet, replay can",
                      channel.name, rig::duration_text(channel.delay_s)));
    }
  }
  return grpc::Status::OK;
}

}  // namespace

std::string list_problems(const std::vector<rig::Problem>& problems, std::size_t most_bytes) {
  std::string list = fmt::format("{} problem{}:", problems.size(), problems.size() == 1 ? "" : "s");
  std::size_t listed = 0;
  for (const rig::Problem& problem : problems) {
    const std::string line = "\n" + problem.text();
    if (list.size() + line.size() > most_bytes) break;
    list += line;
    ++listed;
  }
  if (listed < problems.size()) list += fmt::format("\nand {} more", problems.size() - listed);
  return list;
}

Registry::Registry(WorkerPool& workers, const Clock& clock, const Limits& limits)
    : workers_(workers), clock_(clock), limits_(limits) {}

PutResult Registry::prepare(const Put& request, Revision& revision) const {
  PutResult result;
  if (request.text.size() > limits_.rig_bytes) {
    result.status =
        make_status(Error::kWrongRequest, fmt::format("description: has {} bytes; at most {} are allowed",
                                                      request.text.size(), limits_.rig_bytes));
    return result;
  }
  rig::Loaded loaded = rig::load(request.text, request.file_name);
  if (!loaded.rig) {
    result.status =
        make_status(Error::kWrongDescription, list_problems(loaded.problems, limits_.problem_bytes));
    result.problems = std::move(loaded.problems);
    return result;
  }
  result.name = loaded.rig->name;
  result.status = refuse_delay(*loaded.rig);
  if (!result.status.ok()) return result;
  auto message = to_message(request.text);
  if (!message) {
    result.status =
        make_status(Error::kInternal, fmt::format("rig {}: its JSON form is not a Rig message", result.name));
    return result;
  }
  revision = {
      0, loaded.rig, std::move(*message), request.text, request.author, request.reason, clock_.now_ns()};
  return result;
}

PutResult Registry::put(const Put& request) {
  Revision revision;
  PutResult result = prepare(request, revision);
  if (!result.status.ok()) return result;
  const std::lock_guard lock(mutex_);
  if (stopping_) {
    result.status = stopping();
    return result;
  }
  const auto entry = rigs_.find(result.name);
  if (entry == rigs_.end()) {
    put_new(std::move(revision), result, request.dry_run);
  } else {
    put_again(entry->second, std::move(revision), result, request.dry_run);
  }
  return result;
}

void Registry::put_new(Revision revision, PutResult& result, bool dry_run) {
  if (rigs_.size() >= limits_.rigs) {
    result.status =
        make_status(Error::kLimit, fmt::format("there are {} rigs; no more are allowed", rigs_.size()));
    return;
  }
  result.change = all_new(revision.message);
  result.revision = revision.number = 1;
  if (dry_run) return;
  Entry entry;
  entry.host = std::make_shared<Host>(workers_.next(), clock_, limits_, revision.rig, 1);
  spdlog::info("rig {}: put by \"{}\", reason \"{}\"", result.name, revision.author, revision.reason);
  entry.revisions.push_back(std::move(revision));
  rigs_.emplace(result.name, std::move(entry));
}

void Registry::put_again(Entry& entry, Revision revision, PutResult& result, bool dry_run) {
  const Revision& before = entry.revisions.back();
  result.change = compare(before.message, revision.message);
  if (before.text == revision.text) {
    result.change.set_kind(v1::RigChange::UNCHANGED);
    result.revision = before.number;
    return;
  }
  result.revision = revision.number = before.number + 1;
  if (dry_run) return;
  entry.host->change(revision.rig, revision.number, result.change.restarted());
  spdlog::info("rig {}: revision {} put by \"{}\", reason \"{}\"; {}", result.name, revision.number,
               revision.author, revision.reason,
               result.change.restarted() ? "the posterior starts anew" : "the posterior goes on");
  entry.revisions.push_back(std::move(revision));
  if (entry.revisions.size() > limits_.revisions) entry.revisions.pop_front();
}

grpc::Status Registry::get(const std::string& name, std::uint64_t number, v1::GetRigResponse& answer) const {
  const std::lock_guard lock(mutex_);
  const auto entry = rigs_.find(name);
  if (entry == rigs_.end()) return no_such_rig(name);
  const auto& revisions = entry->second.revisions;
  const auto found = number == 0
                         ? std::prev(revisions.end())
                         : std::find_if(revisions.begin(), revisions.end(),
                                        [&](const Revision& revision) { return revision.number == number; });
  if (found == revisions.end()) {
    return make_status(Error::kNoSuchRig,
                       fmt::format("revision: rig {} has {} to {}, not {}", name, revisions.front().number,
                                   revisions.back().number, number));
  }
  answer.set_revision(found->number);
  *answer.mutable_rig() = found->message;
  answer.set_file(found->text);
  answer.set_author(found->author);
  answer.set_reason(found->reason);
  answer.set_put_time_ns(found->put_time_ns);
  return grpc::Status::OK;
}

void Registry::list(const v1::ListRigsRequest& request, v1::ListRigsResponse& answer) const {
  const std::size_t asked = request.at_most() == 0 ? limits_.list_page : request.at_most();
  const std::size_t most = std::min(asked, limits_.list_page);
  const std::lock_guard lock(mutex_);
  for (auto entry = rigs_.upper_bound(request.after()); entry != rigs_.end(); ++entry) {
    if (static_cast<std::size_t>(answer.rigs_size()) == most) {
      answer.set_more(true);
      return;
    }
    const Revision& revision = entry->second.revisions.back();
    v1::RigSummary& summary = *answer.add_rigs();
    summary.set_name(entry->first);
    summary.set_revision(revision.number);
    summary.set_states(static_cast<std::uint32_t>(revision.rig->model->states.size()));
    summary.set_inputs(static_cast<std::uint32_t>(revision.rig->model->inputs.size()));
    summary.set_channels(static_cast<std::uint32_t>(revision.rig->model->channels.size()));
  }
}

grpc::Status Registry::remove(const std::string& name, const std::string& author, const std::string& reason) {
  const std::lock_guard lock(mutex_);
  const auto entry = rigs_.find(name);
  if (entry == rigs_.end()) return no_such_rig(name);
  entry->second.host->end_now(make_status(Error::kNoSuchRig, fmt::format("rig: {} was removed", name)));
  rigs_.erase(entry);
  spdlog::info("rig {}: removed by \"{}\", reason \"{}\"", name, author, reason);
  return grpc::Status::OK;
}

std::shared_ptr<Host> Registry::find(const std::string& name, grpc::Status& status) const {
  const std::lock_guard lock(mutex_);
  status = grpc::Status::OK;
  if (stopping_) {
    status = stopping();
    return nullptr;
  }
  const auto entry = rigs_.find(name);
  if (entry == rigs_.end()) {
    status = no_such_rig(name);
    return nullptr;
  }
  return entry->second.host;
}

void Registry::stop() {
  const std::lock_guard lock(mutex_);
  stopping_ = true;
  for (const auto& [name, entry] : rigs_) entry.host->end_when_empty(stopping());
}

}  // namespace steelyard::service
