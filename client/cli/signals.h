// SPDX-License-Identifier: Apache-2.0
// Ctrl-C and its like: noticed by the loops of the commands, so that files are closed in order.
#pragma once

#include <functional>
#include <thread>

namespace steelyard::client {

/// SIGINT and SIGTERM ask the command to end (the third time it ends at once); SIGPIPE is ignored, a closed
/// pipe shows as a failed write.
void handle_signals();

/// The command was asked to end.
[[nodiscard]] bool interrupted();

/// Calls `on_interrupt` once, on a thread of its own, when the command is asked to end or when `idle` says
/// so.
class InterruptWatch {
 public:
  explicit InterruptWatch(std::function<void()> on_interrupt, std::function<bool()> idle = {});

 private:
  std::jthread thread_;  // ends with this object
};

}  // namespace steelyard::client
