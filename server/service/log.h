// SPDX-License-Identifier: Apache-2.0
// The service's own log: text for people, or one JSON object a line. To stderr.
#pragma once

namespace steelyard::service {

enum class LogForm { kText, kJson };

/// Sets spdlog's default logger, and sends gRPC's own messages through it. Once, before other threads start.
void set_up_log(LogForm form);

}  // namespace steelyard::service
