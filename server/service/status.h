// SPDX-License-Identifier: Apache-2.0
// What can go wrong for a caller, and the one table that maps it to gRPC's codes: by what the caller should
// do.
#pragma once

#include <grpcpp/support/status.h>

#include <cstdint>
#include <string>

namespace steelyard::service {

enum class Error : std::uint8_t {
  kWrongRequest,      ///< a field is missing, malformed or too large
  kWrongDescription,  ///< a rig with problems
  kNoSuchRig,         ///< never put, or removed
  kNotYetPossible,    ///< a right rig that this version cannot run
  kTimeOutside,       ///< an estimate is asked for before the rig's clock or beyond its horizon
  kNoClock,           ///< an estimate at a time, before the first reading
  kSourceTakenOver,   ///< the same source has opened another feed
  kLimit,             ///< too many rigs, feeds, watches, sources or waiting calls
  kStopping,          ///< the service is shutting down
  kInternal,          ///< a defect of ours
};

/// The gRPC code of an error.
[[nodiscard]] grpc::StatusCode code_of(Error error);

/// `message` names the field, the value and the rule.
[[nodiscard]] grpc::Status make_status(Error error, const std::string& message);

}  // namespace steelyard::service
