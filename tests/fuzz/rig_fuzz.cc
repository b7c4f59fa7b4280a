// SPDX-License-Identifier: Apache-2.0
// Any bytes as a rig file: load() must answer with a rig or with problems, and never throw or abort. A rig
// that loads must load again from its JSON form, and its formulas must bear any numbers.
#include <cstddef>
#include <cstdint>
#include <cstdlib>
#include <limits>
#include <memory>
#include <string_view>
#include <variant>
#include <vector>

#include "rig/rig.h"

namespace {

void require(bool holds) {
  if (!holds) std::abort();
}

void evaluate(const steelyard::engine::Model& model, const steelyard::engine::Law& law) {
  const auto* formula = std::get_if<std::shared_ptr<steelyard::engine::Formula>>(&law);
  if (formula == nullptr) return;
  for (const double value : {0.0, -1.0, 1e300, std::numeric_limits<double>::infinity()}) {
    const std::vector<double> states(model.states.size(), value);
    const std::vector<double> inputs(model.inputs.size(), value);
    (void)(*formula)->evaluate(states, inputs, value);
  }
}

}  // namespace

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t size) {
  const std::string_view text(reinterpret_cast<const char*>(data), size);
  const auto loaded = steelyard::rig::load(text, "fuzz.yaml");
  require((loaded.rig == nullptr) == !loaded.problems.empty());
  for (const auto& problem : loaded.problems) require(!problem.text().empty() && problem.column >= 0);
  if (!loaded.rig) return 0;
  const auto& model = *loaded.rig->model;
  for (const auto& state : model.states) evaluate(model, state.rate);
  for (const auto& channel : model.channels) evaluate(model, channel.reads);
  require(steelyard::rig::load(steelyard::rig::to_json(text), "fuzz.json").rig != nullptr);
  return 0;
}
