// SPDX-License-Identifier: Apache-2.0
// The table of errors and codes.
#include "service/status.h"

namespace steelyard::service {

grpc::StatusCode code_of(Error error) {
  switch (error) {
    case Error::kWrongRequest:
    case Error::kWrongDescription:
      return grpc::StatusCode::INVALID_ARGUMENT;
    case Error::kNoSuchRig:
      return grpc::StatusCode::NOT_FOUND;
    case Error::kNotYetPossible:
    case Error::kNoClock:
      return grpc::StatusCode::FAILED_PRECONDITION;
    case Error::kTimeOutside:
      return grpc::StatusCode::OUT_OF_RANGE;
    case Error::kSourceTakenOver:
      return grpc::StatusCode::ABORTED;
    case Error::kLimit:
      return grpc::StatusCode::RESOURCE_EXHAUSTED;
    case Error::kStopping:
      return grpc::StatusCode::UNAVAILABLE;
    case Error::kInternal:
      return grpc::StatusCode::INTERNAL;
  }
  return grpc::StatusCode::INTERNAL;
}

grpc::Status make_status(Error error, const std::string& message) { return {code_of(error), message}; }

}  // namespace steelyard::service
