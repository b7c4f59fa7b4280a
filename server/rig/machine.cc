// SPDX-License-Identifier: Apache-2.0
// States, inputs, motion, unrest and spells of jolts and stillness.
#include "rig/machine.h"

#include <algorithm>
#include <array>
#include <cstddef>
#include <string>
#include <string_view>
#include <utility>

#include "rig/nearest.h"

namespace steelyard::rig {
namespace {

constexpr std::array<std::string_view, 4> kStateKeys{"unit", "start", "start_sd", "needs"};
constexpr std::array<std::string_view, 5> kInputKeys{"unit", "start", "sd", "period", "range"};
constexpr std::array<std::string_view, 3> kModeKeys{"every", "last", "times"};

std::string required_text(const Fields& fields, std::string_view key, Context& context) {
  const auto item = fields.required(key);
  return item ? read_text(*item, context.problems).value_or("") : "";
}

// A value that formulas are evaluated at: without it nothing can be said of their values.
double start_number(const Fields& fields, std::string_view key, const Limit& limit, double instead,
                    Context& context) {
  const auto item = fields.required(key);
  const auto value = item ? read_number(*item, limit, context.problems) : std::nullopt;
  if (!value) context.starts_right = false;
  return value.value_or(instead);
}

engine::StateModel read_state(const Item& item, Context& context) {
  const Fields fields(item, kStateKeys, context.problems);
  engine::StateModel state;
  state.name = item.node->key;
  state.unit = required_text(fields, "unit", context);
  state.start = start_number(fields, "start", any_number(), 0.0, context);
  state.start_sd = start_number(fields, "start_sd", above(0), 1.0, context);
  if (const auto needs = fields.optional("needs")) {
    state.needs = read_number(*needs, above(0), context.problems);
  }
  return state;
}

void read_input_range(const Fields& fields, engine::InputModel& input, Context& context) {
  input.lo = 0.0;
  input.hi = 1.0;
  const auto item = fields.required("range");
  const auto range = item ? read_range(*item, context.problems) : std::nullopt;
  if (!range) {
    context.starts_right = false;
    return;
  }
  input.lo = range->lo;
  input.hi = range->hi;
  const auto start = fields.optional("start");
  const bool outside = input.start < input.lo || input.start > input.hi;
  if (start && outside) report_rule(*start, "inside the range", context.problems);
}

engine::InputModel read_input(const Item& item, Context& context) {
  const Fields fields(item, kInputKeys, context.problems);
  engine::InputModel input;
  input.name = item.node->key;
  input.unit = required_text(fields, "unit", context);
  const bool started_right = std::exchange(context.starts_right, true);
  input.start = start_number(fields, "start", any_number(), 0.0, context);
  if (context.starts_right) {
    read_input_range(fields, input, context);
  } else if (const auto range = fields.required("range")) {
    (void)read_range(*range, context.problems);  // its own errors; the start cannot be compared with it
  }
  context.starts_right = context.starts_right && started_right;
  if (const auto sd = fields.optional("sd")) {
    input.sd = read_number(*sd, at_least(0), context.problems).value_or(0.0);
  }
  if (const auto period = fields.optional("period")) {
    input.period_s = read_duration_s(*period, context.problems).value_or(0.0);
  }
  return input;
}

// The state that an entry of motion or unrest is about, or null with its name reported.
engine::StateModel* state_of(const Item& item, engine::Model& model, Problems& problems) {
  std::vector<std::string_view> names;
  for (engine::StateModel& state : model.states) {
    if (state.name == item.node->key) return &state;
    names.push_back(state.name);
  }
  if (names.empty()) return nullptr;  // that has been reported
  problems.add(item.node->key_at, item.path, "is not a state" + did_you_mean(item.node->key, names));
  return nullptr;
}

}  // namespace

void read_constants(const std::vector<Item>& entries, Context& context) {
  for (const Item& item : entries) {
    const auto value = read_number(item, any_number(), context.problems);
    if (!value) context.starts_right = false;
    context.scope.constants.emplace_back(item.node->key, value.value_or(1.0));
  }
}

void read_states(const std::vector<Item>& entries, engine::Model& model, Context& context) {
  for (const Item& item : entries) {
    model.states.push_back(read_state(item, context));
    const engine::StateModel& state = model.states.back();
    context.scope.states.push_back(state.name);
    context.states.push_back(state.start);
    context.state_regions.push_back({state.start, state.start_sd});
  }
}

void read_inputs(const std::vector<Item>& entries, engine::Model& model, Context& context) {
  for (const Item& item : entries) {
    model.inputs.push_back(read_input(item, context));
    const engine::InputModel& input = model.inputs.back();
    context.scope.inputs.push_back(input.name);
    context.inputs.push_back(input.start);
    context.input_regions.push_back({0.5 * (input.lo + input.hi), (input.hi - input.lo) / 6.0});
  }
}

bool read_motion(const std::vector<Item>& entries, engine::Model& model, Context& context) {
  for (engine::StateModel& state : model.states) state.rate = constant_law(context, 0.0);
  bool all_affine = true;
  for (const Item& item : entries) {
    if (context.problems.full()) return false;
    engine::StateModel* state = state_of(item, model, context.problems);
    auto law = read_law(item, context);
    if (state == nullptr || !law) continue;
    all_affine = all_affine && law->is_affine;
    state->rate = std::move(law->law);
  }
  return all_affine;
}

void read_unrest(const std::vector<Item>& entries, engine::Model& model, Context& context) {
  for (const Item& item : entries) {
    if (context.problems.full()) return;
    engine::StateModel* state = state_of(item, model, context.problems);
    const auto value = read_number(item, at_least(0), context.problems);
    if (state != nullptr) state->unrest = value.value_or(0.0);
  }
}

void read_mode(const Item& item, engine::ModeModel& mode, Context& context) {
  if (item.node->is_scalar() && item.node->text == "none") {
    mode.on = false;
    return;
  }
  if (!item.node->is_map()) return report_rule(item, "none, or a map {every, last, times}", context.problems);
  const Fields fields(item, kModeKeys, context.problems);
  if (const auto every = fields.optional("every")) {
    mode.every_s = read_duration_s(*every, context.problems).value_or(mode.every_s);
  }
  if (const auto last = fields.optional("last")) {
    mode.last_s = read_duration_s(*last, context.problems).value_or(mode.last_s);
  }
  if (const auto times = fields.optional("times")) {
    mode.times = read_number(*times, above(0), context.problems).value_or(mode.times);
  }
}

}  // namespace steelyard::rig
