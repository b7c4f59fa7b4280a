// SPDX-License-Identifier: Apache-2.0
// Formulas of a description as laws of the model.
#pragma once

#include <memory>
#include <optional>
#include <vector>

#include "engine/model.h"
#include "rig/affine.h"
#include "rig/formula.h"
#include "rig/problems.h"
#include "rig/values.h"

namespace steelyard::rig {

/// What the readers of a description's parts share.
struct Context {
  Problems& problems;
  double response_s = 1.0;
  Scope scope = {};
  std::vector<double> states = {};  ///< where the machine starts
  std::vector<double> inputs = {};
  std::vector<Region> state_regions = {};
  std::vector<Region> input_regions = {};
  bool names_known = true;   ///< false: a part is no map or too large; formulas are not looked at
  bool starts_right = true;  ///< false: values at the start mean nothing
};

struct ReadLaw {
  engine::Law law;
  bool is_affine = false;
  /// Value at the start; nullopt where the start is not known.
  std::optional<double> at_start;
};

/// A formula or a number. Reports every error of it, and a value at the start that is not finite.
[[nodiscard]] std::optional<ReadLaw> read_law(const Item& item, Context& context);

struct ReadSd {
  double at_start = 1.0;
  std::shared_ptr<engine::Formula> formula;  ///< empty where it is constant
};

/// A number greater than 0, or a formula that is so at the start.
[[nodiscard]] std::optional<ReadSd> read_sd(const Item& item, Context& context);

/// A law that does not depend on anything.
[[nodiscard]] engine::AffineForm constant_law(const Context& context, double value);

}  // namespace steelyard::rig
