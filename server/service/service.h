// SPDX-License-Identifier: Apache-2.0
// The calls of proto/steelyard/v1/service.proto. Thin: checks the request, asks the registry or the rig's
// host, maps the status.
#pragma once

#include "service/registry.h"
#include "steelyard/v1/service.grpc.pb.h"

namespace steelyard::service {

class Service final : public v1::Steelyard::CallbackService {
 public:
  /// Both must outlive the service and all its calls.
  Service(Registry& registry, const Limits& limits) : registry_(registry), limits_(limits) {}

  grpc::ServerUnaryReactor* PutRig(grpc::CallbackServerContext* context, const v1::PutRigRequest* request,
                                   v1::PutRigResponse* response) override;
  grpc::ServerUnaryReactor* GetRig(grpc::CallbackServerContext* context, const v1::GetRigRequest* request,
                                   v1::GetRigResponse* response) override;
  grpc::ServerUnaryReactor* ListRigs(grpc::CallbackServerContext* context, const v1::ListRigsRequest* request,
                                     v1::ListRigsResponse* response) override;
  grpc::ServerUnaryReactor* RemoveRig(grpc::CallbackServerContext* context,
                                      const v1::RemoveRigRequest* request,
                                      v1::RemoveRigResponse* response) override;
  grpc::ServerBidiReactor<v1::FeedRequest, v1::FeedResponse>* Feed(
      grpc::CallbackServerContext* context) override;
  grpc::ServerWriteReactor<v1::WatchResponse>* Watch(grpc::CallbackServerContext* context,
                                                     const v1::WatchRequest* request) override;
  grpc::ServerUnaryReactor* Estimate(grpc::CallbackServerContext* context, const v1::EstimateRequest* request,
                                     v1::EstimateResponse* response) override;

 private:
  Registry& registry_;
  const Limits& limits_;
};

}  // namespace steelyard::service
