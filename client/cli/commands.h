// SPDX-License-Identifier: Apache-2.0
// The subcommands. Each add_… puts one into the command line and, when it is chosen, sets `run` to what it
// does; run() returns the exit code.
#pragma once

#include <CLI/CLI.hpp>
#include <functional>

#include "lib/log/text.h"

namespace steelyard::client {

inline constexpr int kDone = 0;
inline constexpr int kFailed = 1;
inline constexpr int kWrongInput = 2;  ///< wrong usage or wrong input

using Run = std::function<int()>;

/// --time seconds|rfc3339, of the commands that write times.
void add_time_option(CLI::App& command, TimeStyle& style);

void add_check(CLI::App& app, Run& run);
void add_replay(CLI::App& app, Run& run);
void add_feed(CLI::App& app, Run& run);
void add_watch(CLI::App& app, Run& run);

}  // namespace steelyard::client
