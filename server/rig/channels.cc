// SPDX-License-Identifier: Apache-2.0
// One channel after another, key by key. Keys that the engine cannot follow yet are checked like all others.
#include "rig/channels.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <optional>

#include "rig/nearest.h"

namespace steelyard::rig {
namespace {

constexpr std::array<std::string_view, 25> kChannelKeys{
    "reads",   "sd",        "range",  "bias_sd", "resolution",  "cutoff",         "modulo",
    "period",  "delay",     "signal", "unit",    "fails_every", "recovers_in",    "changes_in",
    "memory",  "strays",    "tag",    "where",   "offset_size", "prior_readings", "correlation",
    "time_sd", "on_change", "serial", "note"};
constexpr std::array<std::string_view, 2> kOnChangeKeys{"deadband", "heartbeat"};
constexpr std::array<std::string_view, 2> kCommonKeys{"channels", "share"};
constexpr std::string_view kLiveZeroSignal = "4-20 mA";
constexpr std::string_view kNotYet = "is not supported yet; remove it";

class Reader {
 public:
  Reader(const Item& item, std::span<const engine::StateModel> states, Context& context)
      : item_(item), states_(states), context_(context), fields_(item, kChannelKeys, context.problems) {}

  ReadChannel read() {
    out_.model.name = item_.node->key;
    read_reads();
    read_range_of_parts();
    engine::set_defaults(out_.model, context_.response_s);  // knows the range; what follows overrides it
    read_sds();
    read_shape();
    read_times();
    read_habits();
    read_labels();
    check_not_yet();
    return std::move(out_);
  }

 private:
  Problems& problems() { return context_.problems; }

  void number(std::string_view key, const Limit& limit, double& out) {
    if (const auto item = fields_.optional(key)) out = read_number(*item, limit, problems()).value_or(out);
  }

  void duration(std::string_view key, double& out, Zero zero = Zero::kRefused) {
    if (const auto item = fields_.optional(key)) out = read_duration_s(*item, problems(), zero).value_or(out);
  }

  void text(std::string_view key, std::string& out) {
    if (const auto item = fields_.optional(key)) out = read_text(*item, problems()).value_or(out);
  }

  // Calls `read` for the one value of a scalar channel, or for each value of a vector channel's list.
  template <typename Read>
  void each_part(const Item& item, const Read& read) {
    if (!parts_) return read(item);
    if (!item.node->is_list() || item.node->items.size() != *parts_) {
      return report_rule(item, "a list of " + std::to_string(*parts_) + ", one for each part of reads",
                         problems());
    }
    for (const Node& part : item.node->items) read({&part, item.path});
  }

  void read_reads() {
    out_.model.reads = constant_law(context_, 0.0);
    const auto item = fields_.required("reads");
    if (!item) return;
    if (item->node->is_list()) return read_vector(*item);
    auto law = read_law(*item, context_);
    if (!law) return;
    out_.is_affine = law->is_affine;
    out_.model.reads = std::move(law->law);
    out_.model.unit = unit_of(out_.model.reads);
  }

  void read_vector(const Item& item) {
    if (item.node->items.empty()) return report_rule(item, "a formula or a list of formulas", problems());
    parts_ = item.node->items.size();
    for (const Node& part : item.node->items) (void)read_law({&part, item.path}, context_);
    context_.unsupported.add(item.place(), item.path,
                             "is a list; vector channels are not supported yet, make each part a channel");
  }

  // The unit of the states that are read as they are (level, level − 0.15, left − right); else not known.
  [[nodiscard]] std::string unit_of(const engine::Law& law) const {
    const auto* form = std::get_if<engine::AffineForm>(&law);
    if (form == nullptr) return {};
    for (const double weight : form->on_inputs) {
      if (weight != 0.0) return {};
    }
    std::optional<std::string> unit;
    for (std::size_t i = 0; i < form->on_states.size(); ++i) {
      const double weight = form->on_states[i];
      if (weight == 0.0) continue;
      if (std::abs(weight) != 1.0 || (unit && *unit != states_[i].unit)) return {};
      unit = states_[i].unit;
    }
    return unit.value_or("");
  }

  void read_range_of_parts() {
    out_.model.lo = 0.0;
    out_.model.hi = 1.0;
    const auto item = fields_.required("range");
    if (!item) return;
    each_part(*item, [&](const Item& part) {
      const auto range = read_range(part, problems());
      if (!range) return;
      has_range_ = true;
      out_.model.lo = range->lo;
      out_.model.hi = range->hi;
    });
  }

  void read_sds() {
    const auto item = fields_.required("sd");
    if (!item) return;
    each_part(*item, [&](const Item& part) {
      const auto sd = read_sd(part, context_);
      if (!sd) return;
      out_.model.sd = sd->at_start;
      out_.model.sd_formula = sd->formula;
    });
  }

  void read_bias_and_resolution() {
    for (const auto& [key, out] : {std::pair{std::string_view("bias_sd"), &out_.model.bias_sd},
                                   std::pair{std::string_view("resolution"), &out_.model.resolution}}) {
      const auto item = fields_.optional(key);
      if (!item) continue;
      const auto one = [&, value = out](const Item& part) {
        *value = read_number(part, at_least(0), problems()).value_or(*value);
      };
      item->node->is_list() ? each_part(*item, one) : one(*item);
    }
  }

  void read_shape() {
    read_bias_and_resolution();
    const double span = out_.model.hi - out_.model.lo;
    if (has_range_ && !parts_ && out_.model.resolution >= span) {
      report_rule(*fields_.optional("resolution"), "less than the width of the range", problems());
    }
    number("modulo", above(0), out_.model.modulo);
    read_cutoff();
    read_signal();
  }

  void read_cutoff() {
    const auto item = fields_.optional("cutoff");
    if (!item) return;
    out_.model.cutoff = read_number(*item, any_number(), problems());
    if (!out_.model.cutoff || !has_range_ || parts_) return;
    const bool inside = *out_.model.cutoff > out_.model.lo && *out_.model.cutoff < out_.model.hi;
    if (!inside) report_rule(*item, "inside the range", problems());
  }

  void read_signal() {
    const auto item = fields_.optional("signal");
    if (!item) return;
    out_.model.live_zero = item->node->is_scalar() && item->node->text == kLiveZeroSignal;
    if (!out_.model.live_zero) report_rule(*item, kLiveZeroSignal, problems());
  }

  void read_times() {
    engine::ChannelModel& model = out_.model;
    duration("period", model.period_s);
    duration("delay", model.delay_s, Zero::kAllowed);
    duration("fails_every", model.fails_every_s);
    duration("recovers_in", model.recovers_in_s);
    duration("changes_in", model.changes_in_s);
    duration("memory", model.memory_s);
  }

  void read_habits() {
    number("strays", between(0, 0.5), out_.model.strays);
    number("offset_size", above(0), out_.model.offset_size);
    number("prior_readings", above(2), out_.model.prior_readings);
  }

  void read_labels() {
    text("unit", out_.model.unit);
    text("tag", out_.labels.tag);
    text("where", out_.labels.where);
    text("serial", out_.labels.serial);
    text("note", out_.labels.note);
  }

  void check_not_yet() {
    double ignored = 0.0;
    duration("time_sd", ignored);
    if (const auto item = fields_.optional("correlation")) check_correlation(*item);
    if (const auto item = fields_.optional("on_change")) check_on_change(*item);
    for (const std::string_view key : {"time_sd", "correlation", "on_change"}) {
      const auto item = fields_.optional(key);
      if (item) context_.unsupported.add(item->node->key_at, item->path, std::string(kNotYet));
    }
  }

  // Of successive readings, or of each pair of a vector's parts.
  void check_correlation(const Item& item) {
    if (!parts_ || !item.node->is_list()) {
      (void)read_number(item, between(-1, 1), problems());
      return;
    }
    for (const Node& part : item.node->items) {
      (void)read_number({&part, item.path}, between(-1, 1), problems());
    }
  }

  void check_on_change(const Item& item) {
    const Fields fields(item, kOnChangeKeys, problems());
    if (const auto deadband = fields.required("deadband")) (void)read_number(*deadband, above(0), problems());
    if (const auto heartbeat = fields.optional("heartbeat")) (void)read_duration_s(*heartbeat, problems());
  }

  const Item& item_;
  std::span<const engine::StateModel> states_;
  Context& context_;
  Fields fields_;
  ReadChannel out_;
  std::optional<std::size_t> parts_;  ///< of a vector channel
  bool has_range_ = false;
};

void check_member(const Item& item, std::span<const std::string_view> channels, Problems& problems) {
  const std::string& name = item.node->text;
  if (!item.node->is_scalar()) return report_rule(item, "the name of a channel", problems);
  if (std::find(channels.begin(), channels.end(), name) != channels.end()) return;
  problems.add(item.place(), item.path, shown(name) + " is not a channel" + did_you_mean(name, channels));
}

void check_members(const Item& item, std::span<const std::string_view> channels, Problems& problems) {
  if (!item.node->is_list() || item.node->items.size() < 2) {
    return report_rule(item, "a list of at least two channels", problems);
  }
  std::vector<std::string_view> seen;
  for (const Node& member : item.node->items) {
    if (problems.full()) return;
    check_member({&member, item.path}, channels, problems);
    const bool repeated = std::find(seen.begin(), seen.end(), member.text) != seen.end();
    if (repeated) problems.add(member.at, item.path, shown(member.text) + " is listed twice");
    if (!repeated && seen.size() < channels.size()) seen.push_back(member.text);
  }
}

}  // namespace

ReadChannel read_channel(const Item& item, std::span<const engine::StateModel> states, Context& context) {
  return Reader(item, states, context).read();
}

void check_common(const Item& item, std::span<const std::string_view> channels, Context& context) {
  if (!item.node->is_list()) return report_rule(item, "a list of groups {channels, share}", context.problems);
  for (std::size_t i = 0; i < item.node->items.size() && !context.problems.full(); ++i) {
    const Item group{&item.node->items[i], item.path + "[" + std::to_string(i + 1) + "]"};
    const Fields fields(group, kCommonKeys, context.problems);
    if (const auto members = fields.required("channels")) {
      check_members(*members, channels, context.problems);
    }
    if (const auto share = fields.required("share")) {
      (void)read_number(*share, between(0, 1), context.problems);
    }
  }
  if (!item.node->items.empty()) {
    context.unsupported.add(item.node->key_at, item.path, std::string(kNotYet));
  }
}

}  // namespace steelyard::rig
