// SPDX-License-Identifier: Apache-2.0
// From text to a checked rig. Every part is read even where another is wrong, so that all errors are listed;
// only what would be a mere consequence of another error is left out.
#include <algorithm>
#include <array>
#include <exception>
#include <utility>

#include "rig/channels.h"
#include "rig/common.h"
#include "rig/document.h"
#include "rig/laws.h"
#include "rig/machine.h"
#include "rig/names.h"
#include "rig/number.h"
#include "rig/rig.h"
#include "rig/values.h"

namespace steelyard::rig {
namespace {

constexpr std::array<std::string_view, 14> kTopKeys{
    "rig",    "response", "horizon", "lag",   "constants", "states",       "inputs",
    "motion", "unrest",   "jolts",   "still", "common",    "freeze_share", "channels"};
constexpr std::size_t kMaxConstants = 100;
constexpr double kHorizonResponses = 10.0;
constexpr double kLagResponses = 2.0;

class Loader {
 public:
  Loader(const Node& top, Problems& problems)
      : problems_(problems), fields_({&top, ""}, kTopKeys, problems), context_{.problems = problems} {}

  std::shared_ptr<Rig> load() {
    read_head();
    const std::vector<Item> constants = entries("constants", kMaxConstants, fields_.optional("constants"));
    const std::vector<Item> states = needed_entries("states", engine::kMaxStates);
    const std::vector<Item> inputs = entries("inputs", engine::kMaxInputs, fields_.optional("inputs"));
    const std::vector<Item> channels = needed_entries("channels", engine::kMaxChannels);

    read_constants(constants, context_);
    read_states(states, *model_, context_);
    read_inputs(inputs, *model_, context_);
    settle_names({{"constant", constants}, {"state", states}, {"input", inputs}, {"channel", channels}});
    read_laws();
    read_channels(channels);
    rig_->model = model_;
    return rig_;
  }

 private:
  using Kind = std::pair<std::string_view, const std::vector<Item>&>;

  void read_head() {
    if (const auto item = fields_.required("rig")) {
      rig_->name = item->node->text;
      if (!item->node->is_scalar() || !is_rig_name(rig_->name)) {
        report_rule(*item, "1 to 63 small letters, digits and -", problems_);
      }
    }
    if (const auto item = fields_.required("response")) {
      context_.response_s = read_duration_s(*item, problems_).value_or(context_.response_s);
    }
    rig_->response_s = context_.response_s;
    rig_->horizon_s = duration_or("horizon", kHorizonResponses * context_.response_s);
    rig_->lag_s = duration_or("lag", kLagResponses * context_.response_s);
    engine::set_defaults(*model_, context_.response_s);
    if (const auto item = fields_.optional("jolts")) read_mode(*item, model_->jolt, context_);
    if (const auto item = fields_.optional("still")) read_mode(*item, model_->still, context_);
  }

  double duration_or(std::string_view key, double instead) {
    const auto item = fields_.optional(key);
    return item ? read_duration_s(*item, problems_).value_or(instead) : instead;
  }

  std::vector<Item> needed_entries(std::string_view key, std::size_t most) {
    const auto part = fields_.required(key);
    std::vector<Item> out = entries(key, most, part);
    if (part && part->node->is_map() && out.empty()) {
      problems_.add(part->place(), part->path, "has no entries; must have at least one");
    }
    if (out.empty()) context_.names_known = false;
    return out;
  }

  // The entries of a part of the description; none where it is absent or no map.
  std::vector<Item> entries(std::string_view key, std::size_t most, const std::optional<Item>& part) {
    std::vector<Item> out;
    if (!part) return out;
    if (!part->node->is_map()) {
      report_rule(*part, "a map by name", problems_);
      context_.names_known = false;
      return out;
    }
    for (const Node& node : part->node->items) out.push_back({&node, join(key, node.key)});
    if (out.size() <= most) return out;
    context_.names_known = false;
    problems_.add(
        out[most].node->key_at, part->path,
        "has " + std::to_string(out.size()) + " entries; at most " + std::to_string(most) + " are possible");
    out.resize(most);
    return out;
  }

  // Formulas see a name once, and only names that they can spell.
  void settle_names(const std::vector<Kind>& kinds) {
    std::vector<Declared> declared;
    for (const auto& [kind, items] : kinds) {
      for (const Item& item : items) declared.push_back({item.node->key, kind, item.node->key_at, item.path});
    }
    std::vector<std::string> usable = check_names(std::move(declared), problems_);
    const auto claim = [&](const std::string& name) { return std::erase(usable, name) > 0; };
    std::erase_if(context_.scope.constants, [&](const auto& constant) { return !claim(constant.first); });
    for (auto* names : {&context_.scope.states, &context_.scope.inputs}) {
      for (std::string& name : *names) {
        if (!claim(name)) name.clear();
      }
    }
  }

  void read_laws() {
    const auto unlimited = static_cast<std::size_t>(-1);
    const auto motion = entries("motion", unlimited, fields_.optional("motion"));
    rig_->motion_is_affine = read_motion(motion, *model_, context_);
    read_unrest(entries("unrest", unlimited, fields_.optional("unrest")), *model_, context_);
  }

  // The parts of all channels so far; tells once where they become too many.
  int count_parts(const Item& item, int before, int more) {
    const int parts = before + more;
    const Node* const reads = item.node->find("reads");
    const bool told = reads != nullptr && reads->items.size() > static_cast<std::size_t>(engine::kMaxParts);
    if (before <= engine::kMaxParts && parts > engine::kMaxParts && !told) {
      problems_.add(item.node->key_at, item.path,
                    "makes " + std::to_string(parts) + " parts in all channels; at most " +
                        std::to_string(engine::kMaxParts) + " are possible");
    }
    return parts;
  }

  void read_channels(const std::vector<Item>& items) {
    int parts = 0;
    for (const Item& item : items) {
      ReadChannel channel = read_channel(item, model_->states, context_);
      parts = count_parts(item, parts, channel.model.parts());
      model_->channels.push_back(std::move(channel.model));
      rig_->labels.push_back(std::move(channel.labels));
      rig_->reading_is_affine.push_back(channel.is_affine);
    }
    if (const auto item = fields_.optional("common")) read_common(*item, *model_, context_);
    if (const auto item = fields_.optional("freeze_share")) {
      model_->freeze_share = read_number(*item, from_to(0, 1), problems_).value_or(model_->freeze_share);
    }
  }

  Problems& problems_;
  Fields fields_;
  Context context_;
  std::shared_ptr<Rig> rig_ = std::make_shared<Rig>();
  std::shared_ptr<engine::Model> model_ = std::make_shared<engine::Model>();
};

// A message's maps come in any order; in order of names the same message is the same model each time.
void sort_by_name(Node& top) {
  for (Node& part : top.items) {
    const bool has_names = part.key == "states" || part.key == "inputs" || part.key == "channels";
    if (!has_names || !part.is_map()) continue;
    std::stable_sort(part.items.begin(), part.items.end(),
                     [](const Node& a, const Node& b) { return a.key < b.key; });
  }
}

std::shared_ptr<Rig> load_checked(std::string_view text, Problems& problems) {
  std::optional<Node> top = parse_document(text, problems);
  if (!top) return nullptr;
  if (is_json(text)) sort_by_name(*top);
  std::shared_ptr<Rig> rig = Loader(*top, problems).load();
  if (!problems.empty()) return nullptr;
  // Nothing should be left for the engine to find; if it does, say so rather than run.
  if (std::string why = rig->model->problem(); !why.empty()) problems.add({0, 0}, "", std::move(why));
  return problems.empty() ? rig : nullptr;
}

}  // namespace

Loaded load(std::string_view text, std::string_view file) {
  const std::string_view content = without_byte_order_mark(text);
  Problems problems(file, content);
  Loaded out;
  try {
    const std::shared_ptr<Rig> rig = load_checked(content, problems);
    if (rig) rig->text = text;
    out.rig = rig;
  } catch (const std::exception& error) {  // no memory left, or a defect of ours
    problems.add({0, 0}, "", std::string("cannot be loaded: ") + error.what());
  } catch (...) {
    problems.add({0, 0}, "", "cannot be loaded");
  }
  out.problems = problems.take();
  if (!out.problems.empty()) out.rig = nullptr;
  return out;
}

std::optional<Signal> Rig::find(std::string_view signal) const {
  for (std::size_t i = 0; i < model->inputs.size(); ++i) {
    if (model->inputs[i].name == signal) return Signal{true, static_cast<int>(i)};
  }
  for (std::size_t i = 0; i < model->channels.size(); ++i) {
    if (model->channels[i].name == signal) return Signal{false, static_cast<int>(i)};
  }
  return std::nullopt;
}

}  // namespace steelyard::rig
