// SPDX-License-Identifier: Apache-2.0
// Unary calls and watches.
#include "lib/client.h"

#include <grpcpp/client_context.h>
#include <grpcpp/create_channel.h>
#include <grpcpp/security/credentials.h>

#include <algorithm>
#include <utility>

#include "lib/clock.h"

namespace steelyard::client {
namespace {

constexpr int kFirstBackOffMs = 100;
constexpr int kLongestBackOffMs = 3'000;
constexpr int kHandshakeMs = 10'000;  // gRPC's "least back-off" is how long one attempt may take
constexpr int kKeepaliveMs = 20'000;
constexpr int kKeepaliveTimeoutMs = 10'000;
constexpr std::chrono::milliseconds kPoll{100};  // how soon a stop is noticed while connecting

std::shared_ptr<grpc::Channel> make_channel(const std::string& address) {
  grpc::ChannelArguments arguments;
  arguments.SetInt(GRPC_ARG_INITIAL_RECONNECT_BACKOFF_MS, kFirstBackOffMs);
  arguments.SetInt(GRPC_ARG_MIN_RECONNECT_BACKOFF_MS, kHandshakeMs);
  arguments.SetInt(GRPC_ARG_MAX_RECONNECT_BACKOFF_MS, kLongestBackOffMs);
  arguments.SetInt(GRPC_ARG_KEEPALIVE_TIME_MS, kKeepaliveMs);
  arguments.SetInt(GRPC_ARG_KEEPALIVE_TIMEOUT_MS, kKeepaliveTimeoutMs);
  arguments.SetInt(GRPC_ARG_ENABLE_HTTP_PROXY, 0);          // plant networks: what the address says is meant
  arguments.SetInt(GRPC_ARG_USE_LOCAL_SUBCHANNEL_POOL, 1);  // a connection of its own for each client
  return grpc::CreateCustomChannel(address, grpc::InsecureChannelCredentials(), arguments);
}

void set_deadline(grpc::ClientContext& context, std::chrono::milliseconds call) {
  context.set_deadline(wall_now() + call);
}

}  // namespace

Client::Client(const std::string& address, Patience patience)
    : channel_(make_channel(address)),
      stub_(v1::Steelyard::NewStub(channel_)),
      address_(address),
      patience_(patience) {}

grpc::Status Client::connect(std::stop_token stop) {
  const auto give_up = steady_now() + patience_.connect;
  while (!channel_->WaitForConnected(wall_now() + kPoll)) {
    if (stop.stop_requested()) return {grpc::StatusCode::CANCELLED, "connecting was cancelled"};
    if (steady_now() >= give_up) {
      return {grpc::StatusCode::UNAVAILABLE, "no service answers at " + address_};
    }
  }
  grpc::ClientContext context;
  set_deadline(context, patience_.call);
  v1::ListRigsRequest request;
  request.set_at_most(1);
  v1::ListRigsResponse answer;
  const grpc::Status status = stub_->ListRigs(&context, request, &answer);
  if (status.error_code() != grpc::StatusCode::UNIMPLEMENTED) return status;
  return {grpc::StatusCode::UNIMPLEMENTED, "what answers at " + address_ + " is no steelyardd"};
}

grpc::Status Client::put_rig(const PutRig& put, v1::PutRigResponse& answer) {
  v1::PutRigRequest request;
  request.set_file(put.text);
  request.set_file_name(put.file_name);
  request.set_dry_run(put.dry_run);
  request.set_author(put.author);
  request.set_reason(put.reason);
  request.set_answer_problems(true);
  grpc::ClientContext context;
  set_deadline(context, patience_.call);
  return stub_->PutRig(&context, request, &answer);
}

grpc::Status Client::get_rig(const std::string& name, v1::GetRigResponse& answer) {
  v1::GetRigRequest request;
  request.set_name(name);
  grpc::ClientContext context;
  set_deadline(context, patience_.call);
  return stub_->GetRig(&context, request, &answer);
}

grpc::Status Client::list_rigs(std::vector<v1::RigSummary>& rigs) {
  rigs.clear();
  v1::ListRigsResponse answer;
  do {
    v1::ListRigsRequest request;
    if (!rigs.empty()) request.set_after(rigs.back().name());
    grpc::ClientContext context;
    set_deadline(context, patience_.call);
    answer.Clear();
    if (auto status = stub_->ListRigs(&context, request, &answer); !status.ok()) return status;
    rigs.insert(rigs.end(), answer.rigs().begin(), answer.rigs().end());
  } while (answer.more() && answer.rigs_size() > 0);
  return grpc::Status::OK;
}

grpc::Status Client::remove_rig(const std::string& name, const std::string& author,
                                const std::string& reason) {
  v1::RemoveRigRequest request;
  request.set_name(name);
  request.set_author(author);
  request.set_reason(reason);
  grpc::ClientContext context;
  set_deadline(context, patience_.call);
  v1::RemoveRigResponse answer;
  return stub_->RemoveRig(&context, request, &answer);
}

grpc::Status Client::estimate(const std::string& rig, std::optional<std::int64_t> time_ns,
                              v1::Moment& moment) {
  v1::EstimateRequest request;
  request.set_rig(rig);
  if (time_ns) request.set_time_ns(*time_ns);
  grpc::ClientContext context;
  set_deadline(context, patience_.call);
  v1::EstimateResponse answer;
  grpc::Status status = stub_->Estimate(&context, request, &answer);
  if (status.ok()) moment = std::move(*answer.mutable_moment());
  return status;
}

grpc::Status Client::watch(const v1::WatchRequest& request, const OnUpdate& on_update, std::stop_token stop) {
  grpc::ClientContext context;
  const auto reader = stub_->Watch(&context, request);
  const std::stop_callback cancel(stop, [&context] { context.TryCancel(); });
  bool ended_here = false;
  v1::WatchResponse update;
  while (reader->Read(&update)) {
    if (ended_here || on_update(update)) continue;
    ended_here = true;
    context.TryCancel();
  }
  grpc::Status status = reader->Finish();
  return ended_here || stop.stop_requested() ? grpc::Status::OK : status;
}

std::unique_ptr<Feed> Client::feed(FeedOptions options) {
  return std::make_unique<Feed>(stub_, std::move(options), patience_.connect);
}

}  // namespace steelyard::client
