// SPDX-License-Identifier: Apache-2.0
// What a channel reads, part by part: a scalar channel has one part, a vector channel several.
#pragma once

#include <cstddef>
#include <span>
#include <string_view>
#include <vector>

#include "engine/model.h"
#include "rig/laws.h"
#include "rig/values.h"

namespace steelyard::rig {

struct Parts {
  std::vector<engine::PartModel> all;  ///< at least one, at most engine::kMaxParts
  bool is_affine = true;               ///< every part that could be read
  bool has_ranges = false;             ///< every range is right
};

/// Reads reads, sd, range, bias_sd, resolution, offset_size and unit; what is wrong goes to the context's
/// problems, and a default stands for it.
[[nodiscard]] Parts read_parts(const Fields& fields, std::span<const engine::StateModel> states,
                               Context& context);

/// Correlations of the noise of each pair of `parts` ≥ 2 parts, in the order (1,2), (1,3) … (2,3) …; empty
/// where they are wrong, which includes those that no noise can have.
[[nodiscard]] std::vector<double> read_pair_correlations(const Item& item, std::size_t parts,
                                                         Problems& problems);

}  // namespace steelyard::rig
