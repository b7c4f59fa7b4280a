// SPDX-License-Identifier: Apache-2.0
// The option --time, which several commands have.
#include <string>

#include "cli/commands.h"

namespace steelyard::client {

void add_time_option(CLI::App& command, TimeStyle& style) {
  command
      .add_option_function<std::string>(
          "--time",
          [&style](const std::string& text) {
            style = text == "rfc3339" ? TimeStyle::kRfc3339 : TimeStyle::kSeconds;
          },
          "How times are written: seconds (since 1970, the default) or rfc3339 (UTC)")
      ->check(CLI::IsMember({"seconds", "rfc3339"}))
      ->type_name("STYLE");
}

}  // namespace steelyard::client
