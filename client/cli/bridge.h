// SPDX-License-Identifier: Apache-2.0
// What came over the wire, as the structures that the outputs are made of; and errors of the service as exit
// codes.
#pragma once

#include <grpcpp/support/status.h>

#include <memory>
#include <string>
#include <vector>

#include "cli/columns.h"
#include "engine/estimate.h"
#include "lib/client.h"
#include "rig/rig.h"

namespace steelyard::client {

/// One update of a watch.
struct Picture {
  Names names;
  std::vector<std::string> state_units;
  std::vector<std::string> words;         ///< by channel
  std::vector<std::string> explanations;  ///< those of the estimate, in words
  std::string quality;                    ///< of the estimate: "good", "uncertain", "bad"
  engine::TimeNs clock_ns = 0;            ///< newest accepted reading
  double behind_s = 0.0;
  bool started = false;
  engine::Estimate estimate;  ///< without inputs
};

[[nodiscard]] Picture picture_of(const v1::Moment& moment);

/// Tells stderr what the service answered; the exit code for it.
[[nodiscard]] int fail_with(const std::string& what, const grpc::Status& status);

/// The rig of that name from the service, checked here; null, with `status` set, if it cannot be had.
[[nodiscard]] std::shared_ptr<const rig::Rig> fetch_rig(Client& client, const std::string& name,
                                                        grpc::Status& status);

}  // namespace steelyard::client
