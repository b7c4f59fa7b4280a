// SPDX-License-Identifier: Apache-2.0
// The option --time, which several commands have.
#include <map>
#include <string>

#include "cli/commands.h"

namespace steelyard::client {

void add_time_option(CLI::App& command, TimeStyle& style) {
  static const std::map<std::string, TimeStyle> kStyles{{"seconds", TimeStyle::kSeconds},
                                                        {"rfc3339", TimeStyle::kRfc3339}};
  command
      .add_option("--time", style,
                  "How times are written: seconds (since 1970, the default) or rfc3339 (UTC)")
      ->transform(CLI::CheckedTransformer(kStyles))
      ->type_name("STYLE");
}

}  // namespace steelyard::client
