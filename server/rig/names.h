// SPDX-License-Identifier: Apache-2.0
// The names that a description declares, and whether they may be used.
#pragma once

#include <string>
#include <string_view>
#include <vector>

#include "rig/problems.h"

namespace steelyard::rig {

/// One name declared by a description. `kind` is "constant", "state", "input" or "channel".
struct Declared {
  std::string name;
  std::string_view kind;
  Place at;
  std::string path;
};

/// Reports names of a wrong form, names that formulas or logs need for themselves, and names given to two
/// things; the later one in the text is the wrong one. Returns the names that formulas can use.
[[nodiscard]] std::vector<std::string> check_names(std::vector<Declared> declared, Problems& problems);

/// The name of a rig: [a-z0-9-], 1 to 63 characters.
[[nodiscard]] bool is_rig_name(std::string_view name);

}  // namespace steelyard::rig
