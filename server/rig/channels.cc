// SPDX-License-Identifier: Apache-2.0
// One channel after another, key by key. What belongs to a part of a vector channel is in parts.cc.
#include "rig/channels.h"

#include <array>
#include <optional>
#include <string>
#include <string_view>
#include <utility>

#include "rig/parts.h"

namespace steelyard::rig {
namespace {

constexpr std::array<std::string_view, 25> kChannelKeys{
    "reads",   "sd",        "range",  "bias_sd", "resolution",  "cutoff",         "modulo",
    "period",  "delay",     "signal", "unit",    "fails_every", "recovers_in",    "changes_in",
    "memory",  "strays",    "tag",    "where",   "offset_size", "prior_readings", "correlation",
    "time_sd", "on_change", "serial", "note"};
constexpr std::array<std::string_view, 2> kOnChangeKeys{"deadband", "heartbeat"};
constexpr std::string_view kLiveZeroSignal = "4-20 mA";

class Reader {
 public:
  Reader(const Item& item, std::span<const engine::StateModel> states, Context& context)
      : item_(item), states_(states), context_(context), fields_(item, kChannelKeys, context.problems) {}

  ReadChannel read() {
    out_.model.name = item_.node->key;
    engine::set_defaults(out_.model, context_.response_s);  // what follows overrides them
    take_parts(read_parts(fields_, states_, context_));
    read_times();
    read_habits();
    read_shape();
    read_labels();
    return std::move(out_);
  }

 private:
  Problems& problems() { return context_.problems; }
  [[nodiscard]] bool is_vector() const { return out_.model.parts() > 1; }

  void take_parts(Parts parts) {
    static_cast<engine::PartModel&>(out_.model) = std::move(parts.all[0]);
    out_.model.others.assign(std::make_move_iterator(parts.all.begin() + 1),
                             std::make_move_iterator(parts.all.end()));
    out_.is_affine = parts.is_affine;
    has_ranges_ = parts.has_ranges;
  }

  void number(std::string_view key, const Limit& limit, double& out) {
    if (const auto item = fields_.optional(key)) out = read_number(*item, limit, problems()).value_or(out);
  }

  void duration(std::string_view key, double& out, Zero zero = Zero::kRefused) {
    if (const auto item = fields_.optional(key)) out = read_duration_s(*item, problems(), zero).value_or(out);
  }

  void text(std::string_view key, std::string& out) {
    if (const auto item = fields_.optional(key)) out = read_text(*item, problems()).value_or(out);
  }

  // A key that only a channel of one part can have.
  std::optional<Item> scalar_only(std::string_view key) {
    auto item = fields_.optional(key);
    if (!item || !is_vector()) return item;
    problems().add(
        item->node->key_at, item->path,
        "is given for a channel of " + std::to_string(out_.model.parts()) + " parts; must be left out there");
    return std::nullopt;
  }

  void read_times() {
    engine::ChannelModel& model = out_.model;
    duration("period", model.period_s);
    duration("delay", model.delay_s, Zero::kAllowed);
    duration("time_sd", model.time_sd_s, Zero::kAllowed);
    duration("fails_every", model.fails_every_s);
    duration("recovers_in", model.recovers_in_s);
    duration("changes_in", model.changes_in_s);
    duration("memory", model.memory_s);
  }

  void read_habits() {
    number("strays", between(0, 0.5), out_.model.strays);
    number("prior_readings", above(2), out_.model.prior_readings);
    if (const auto item = fields_.optional("correlation")) read_correlation(*item);
    if (const auto item = scalar_only("on_change")) read_on_change(*item);
  }

  // Of the parts of a vector channel, or of successive readings.
  void read_correlation(const Item& item) {
    if (is_vector()) {
      const auto parts = static_cast<std::size_t>(out_.model.parts());
      out_.model.part_correlation = read_pair_correlations(item, parts, problems());
      return;
    }
    const auto value = read_number(item, at_least_and_below(0, 1), problems());
    if (!value) return;
    if (*value > 0.0 && out_.model.period_s == 0.0) {
      return report_rule(item, "0 without a period: it is between readings one period apart", problems());
    }
    out_.model.correlation = *value;
  }

  void read_on_change(const Item& item) {
    const Fields fields(item, kOnChangeKeys, problems());
    engine::OnChange on_change;
    if (const auto deadband = fields.required("deadband")) {
      const auto value = read_number(*deadband, above(0), problems());
      if (value && has_ranges_ && *value >= out_.model.hi - out_.model.lo) {
        report_rule(*deadband, "less than the width of the range", problems());
      }
      on_change.deadband = value.value_or(1.0);
    }
    if (const auto heartbeat = fields.optional("heartbeat")) {
      on_change.heartbeat_s = read_duration_s(*heartbeat, problems()).value_or(0.0);
    }
    out_.model.on_change = on_change;
  }

  void read_shape() {
    if (const auto item = scalar_only("modulo")) {
      out_.model.modulo = read_number(*item, above(0), problems()).value_or(0.0);
    }
    if (const auto item = scalar_only("cutoff")) read_cutoff(*item);
    if (const auto item = scalar_only("signal")) read_signal(*item);
  }

  void read_cutoff(const Item& item) {
    out_.model.cutoff = read_number(item, any_number(), problems());
    if (!out_.model.cutoff || !has_ranges_) return;
    const bool inside = *out_.model.cutoff > out_.model.lo && *out_.model.cutoff < out_.model.hi;
    if (!inside) report_rule(item, "inside the range", problems());
  }

  void read_signal(const Item& item) {
    out_.model.live_zero = item.node->is_scalar() && item.node->text == kLiveZeroSignal;
    if (!out_.model.live_zero) report_rule(item, kLiveZeroSignal, problems());
  }

  void read_labels() {
    text("tag", out_.labels.tag);
    text("where", out_.labels.where);
    text("serial", out_.labels.serial);
    text("note", out_.labels.note);
  }

  const Item& item_;
  std::span<const engine::StateModel> states_;
  Context& context_;
  Fields fields_;
  ReadChannel out_;
  bool has_ranges_ = false;
};

}  // namespace

ReadChannel read_channel(const Item& item, std::span<const engine::StateModel> states, Context& context) {
  return Reader(item, states, context).read();
}

}  // namespace steelyard::rig
