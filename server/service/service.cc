// SPDX-License-Identifier: Apache-2.0
// Thin handlers.
#include "service/service.h"

#include <spdlog/fmt/fmt.h>

#include <exception>

#include "service/convert.h"
#include "service/describe.h"
#include "service/feed_stream.h"
#include "service/status.h"
#include "service/watch_stream.h"

namespace steelyard::service {
namespace {

grpc::Status check_bytes(const char* field, const std::string& value, std::size_t most) {
  if (value.size() <= most) return grpc::Status::OK;
  return make_status(Error::kWrongRequest,
                     fmt::format("{}: has {} bytes; at most {} are allowed", field, value.size(), most));
}

grpc::Status check_author(const std::string& author, const std::string& reason, const Limits& limits) {
  if (auto status = check_bytes("author", author, limits.name_bytes); !status.ok()) return status;
  return check_bytes("reason", reason, limits.reason_bytes);
}

grpc::Status read_put(const v1::PutRigRequest& request, const Limits& limits, Put& put) {
  if (auto status = check_author(request.author(), request.reason(), limits); !status.ok()) return status;
  if (auto status = check_bytes("file_name", request.file_name(), limits.reason_bytes); !status.ok())
    return status;
  put.file_name = request.file_name().empty() ? "rig" : request.file_name();
  put.dry_run = request.dry_run();
  put.author = request.author();
  put.reason = request.reason();
  if (request.has_file()) {
    put.text = request.file();
    return grpc::Status::OK;
  }
  if (!request.has_rig()) {
    return make_status(Error::kWrongRequest,
                       "description: is empty; must be a rig message or the text of a file");
  }
  auto text = to_text(request.rig());
  if (!text)
    return make_status(Error::kWrongRequest, "rig: holds an empty Value; must be a number, a text or a list");
  put.text = std::move(*text);
  return grpc::Status::OK;
}

void answer_problems(const std::vector<rig::Problem>& problems, v1::PutRigResponse& response) {
  for (const rig::Problem& from : problems) {
    v1::Problem& to = *response.add_problems();
    to.set_line(from.line);
    to.set_column(from.column);
    to.set_field(from.field);
    to.set_message(from.message);
    to.set_text(from.text());
  }
}

grpc::Status put_rig(Registry& registry, const Limits& limits, const v1::PutRigRequest& request,
                     v1::PutRigResponse& response) {
  Put put;
  if (auto status = read_put(request, limits, put); !status.ok()) return status;
  PutResult result = registry.put(put);
  if (!result.problems.empty() && request.answer_problems()) {
    answer_problems(result.problems, response);
    return grpc::Status::OK;
  }
  response.set_name(result.name);
  response.set_revision(result.revision);
  *response.mutable_change() = std::move(result.change);
  return result.status;
}

grpc::Status check_time(const Machine& machine, std::int64_t time_ns) {
  if (!machine.started()) {
    return make_status(
        Error::kNoClock,
        fmt::format("time_ns: is {}; rig {} has no clock before its first reading (leave it empty)", time_ns,
                    machine.rig().name));
  }
  const std::int64_t first = machine.clock_ns();
  const std::int64_t last = first + machine.horizon_ns();
  if (time_ns >= first && time_ns <= last) return grpc::Status::OK;
  return make_status(
      Error::kTimeOutside,
      fmt::format("time_ns: is {}; must be from the rig's clock, {}, to one horizon after it, {}", time_ns,
                  first, last));
}

grpc::Status estimate_or_throw(Machine& machine, const v1::EstimateRequest& request,
                               v1::EstimateResponse& response) {
  if (!request.has_time_ns()) {
    fill_moment(machine.at_clock(), *response.mutable_moment());
    return grpc::Status::OK;
  }
  if (auto status = check_time(machine, request.time_ns()); !status.ok()) return status;
  fill_moment(machine.at(request.time_ns()), *response.mutable_moment());
  return grpc::Status::OK;
}

grpc::Status estimate(Machine& machine, const v1::EstimateRequest& request, v1::EstimateResponse& response) {
  try {
    return estimate_or_throw(machine, request, response);
  } catch (const std::exception& error) {  // the call must be answered whatever happens
    return make_status(Error::kInternal, error.what());
  }
}

grpc::ServerUnaryReactor* finish(grpc::CallbackServerContext* context, const grpc::Status& status) {
  grpc::ServerUnaryReactor* reactor = context->DefaultReactor();
  reactor->Finish(status);
  return reactor;
}

}  // namespace

grpc::ServerUnaryReactor* Service::PutRig(grpc::CallbackServerContext* context,
                                          const v1::PutRigRequest* request, v1::PutRigResponse* response) {
  try {
    return finish(context, put_rig(registry_, limits_, *request, *response));
  } catch (const std::exception& error) {
    return finish(context, make_status(Error::kInternal, error.what()));
  }
}

grpc::ServerUnaryReactor* Service::GetRig(grpc::CallbackServerContext* context,
                                          const v1::GetRigRequest* request, v1::GetRigResponse* response) {
  return finish(context, registry_.get(request->name(), request->revision(), *response));
}

grpc::ServerUnaryReactor* Service::ListRigs(grpc::CallbackServerContext* context,
                                            const v1::ListRigsRequest* request,
                                            v1::ListRigsResponse* response) {
  registry_.list(*request, *response);
  return finish(context, grpc::Status::OK);
}

grpc::ServerUnaryReactor* Service::RemoveRig(grpc::CallbackServerContext* context,
                                             const v1::RemoveRigRequest* request,
                                             v1::RemoveRigResponse* /*response*/) {
  if (auto status = check_author(request->author(), request->reason(), limits_); !status.ok()) {
    return finish(context, status);
  }
  return finish(context, registry_.remove(request->name(), request->author(), request->reason()));
}

grpc::ServerBidiReactor<v1::FeedRequest, v1::FeedResponse>* Service::Feed(
    grpc::CallbackServerContext* /*context*/) {
  return FeedStream::start(registry_, limits_);
}

grpc::ServerWriteReactor<v1::WatchResponse>* Service::Watch(grpc::CallbackServerContext* /*context*/,
                                                            const v1::WatchRequest* request) {
  return WatchStream::start(registry_, limits_, *request);
}

grpc::ServerUnaryReactor* Service::Estimate(grpc::CallbackServerContext* context,
                                            const v1::EstimateRequest* request,
                                            v1::EstimateResponse* response) {
  grpc::Status status;
  const auto host = registry_.find(request->rig(), status);
  if (!host) return finish(context, status);
  grpc::ServerUnaryReactor* reactor = context->DefaultReactor();
  status = host->ask([=](Machine* machine, const grpc::Status& ended) {
    reactor->Finish(machine ? estimate(*machine, *request, *response) : ended);
  });
  if (!status.ok()) reactor->Finish(status);
  return reactor;
}

}  // namespace steelyard::service
