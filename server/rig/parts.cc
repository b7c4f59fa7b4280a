// SPDX-License-Identifier: Apache-2.0
// Parts of channels: where `reads` is a list, sd and range are lists of the same length, and what all parts
// can share may be one number or a list.
#include "rig/parts.h"

#include <algorithm>
#include <cmath>
#include <optional>
#include <string>
#include <utility>

namespace steelyard::rig {
namespace {

constexpr auto kMostParts = static_cast<std::size_t>(engine::kMaxParts);
constexpr double kDefaultOffset = 0.1;  // of the range

// The unit of the states that are read as they are (level, level − 0.15, left − right); else not known.
std::string unit_of(const engine::Law& law, std::span<const engine::StateModel> states) {
  const auto* form = std::get_if<engine::AffineForm>(&law);
  if (form == nullptr) return {};
  for (const double weight : form->on_inputs) {
    if (weight != 0.0) return {};
  }
  std::optional<std::string> unit;
  for (std::size_t i = 0; i < form->on_states.size(); ++i) {
    const double weight = form->on_states[i];
    if (weight == 0.0) continue;
    if (std::abs(weight) != 1.0 || (unit && *unit != states[i].unit)) return {};
    unit = states[i].unit;
  }
  return unit.value_or("");
}

void report_length(const Item& item, std::size_t length, std::string_view what, Problems& problems) {
  const std::string count = item.node->is_list() ? " of " + std::to_string(item.node->items.size()) : "";
  problems.add(item.place(), item.path,
               "is " + described(*item.node) + count + "; must be a list of " + std::to_string(length) +
                   ", " + std::string(what));
}

class PartsReader {
 public:
  PartsReader(const Fields& fields, std::span<const engine::StateModel> states, Context& context)
      : fields_(fields), states_(states), context_(context) {}

  Parts read() {
    read_reads();
    read_ranges();
    read_sds();
    read_numbers("bias_sd", at_least(0), &engine::PartModel::bias_sd);
    read_numbers("resolution", at_least(0), &engine::PartModel::resolution);
    read_numbers("offset_size", above(0), &engine::PartModel::offset_size);
    if (const auto item = fields_.optional("unit")) read_unit(*item);
    return std::move(out_);
  }

 private:
  Problems& problems() { return context_.problems; }

  void read_reads() {
    out_.all.resize(1);
    out_.all[0].reads = constant_law(context_, 0.0);
    const auto item = fields_.required("reads");
    if (!item) return;
    if (!item->node->is_list()) return read_one(*item, out_.all[0]);
    length_ = item->node->items.size();
    if (*length_ == 0) return report_rule(*item, "a formula or a list of formulas", problems());
    if (*length_ > kMostParts) {
      problems().add(item->place(), item->path,
                     "has " + std::to_string(*length_) + " parts; at most " + std::to_string(kMostParts) +
                         " are possible");
    }
    out_.all.resize(std::min(*length_, kMostParts), out_.all[0]);
    each_part(*item, [&](const Item& one, engine::PartModel& part) { read_one(one, part); });
  }

  void read_one(const Item& item, engine::PartModel& part) {
    auto law = read_law(item, context_);
    if (!law) return;
    out_.is_affine = out_.is_affine && law->is_affine;
    part.reads = std::move(law->law);
    part.unit = unit_of(part.reads, states_);
  }

  // Calls `read` for the one value of a scalar channel, or for each value of a vector channel's list.
  template <typename Read>
  void each_part(const Item& item, const Read& read) {
    if (!length_) return read(item, out_.all[0]);
    if (!item.node->is_list() || item.node->items.size() != *length_) {
      return report_length(item, *length_, "one for each part of reads", problems());
    }
    for (std::size_t i = 0; i < out_.all.size() && i < *length_; ++i) {
      const Node& node = item.node->items[i];
      read({&node, item.path + "[" + std::to_string(i + 1) + "]"}, out_.all[i]);
    }
  }

  void read_ranges() {
    std::size_t right = 0;
    for (engine::PartModel& part : out_.all) part.hi = 1.0;
    const auto item = fields_.required("range");
    if (!item) return;
    each_part(*item, [&](const Item& one, engine::PartModel& part) {
      const auto range = read_range(one, problems());
      if (!range) return;
      ++right;
      part.lo = range->lo;
      part.hi = range->hi;
    });
    out_.has_ranges = right == out_.all.size();
    for (engine::PartModel& part : out_.all) part.offset_size = kDefaultOffset * (part.hi - part.lo);
  }

  void read_sds() {
    const auto item = fields_.required("sd");
    if (!item) return;
    each_part(*item, [&](const Item& one, engine::PartModel& part) {
      const auto sd = read_sd(one, context_);
      if (!sd) return;
      part.sd = sd->at_start;
      part.sd_formula = sd->formula;
    });
  }

  void read_numbers(std::string_view key, const Limit& limit, double engine::PartModel::*out) {
    const auto item = fields_.optional(key);
    if (!item) return;
    const auto one = [&](const Item& value, engine::PartModel& part) {
      const auto number = read_number(value, limit, problems());
      if (!number) return;
      part.*out = *number;
      if (key == "resolution") check_resolution(value, part);
    };
    if (length_ && !item->node->is_list()) return read_for_all(*item, limit, out);
    each_part(*item, one);
  }

  // One number for all parts of a vector channel.
  void read_for_all(const Item& item, const Limit& limit, double engine::PartModel::*out) {
    const auto number = read_number(item, limit, problems());
    if (!number) return;
    for (engine::PartModel& part : out_.all) part.*out = *number;
    if (out == &engine::PartModel::resolution) {
      const auto widest = std::find_if(out_.all.begin(), out_.all.end(), [](const engine::PartModel& part) {
        return part.resolution >= part.hi - part.lo;
      });
      if (widest != out_.all.end()) check_resolution(item, *widest);
    }
  }

  void check_resolution(const Item& item, const engine::PartModel& part) {
    if (!out_.has_ranges || part.resolution < part.hi - part.lo) return;
    report_rule(item, "less than the width of the range", problems());
  }

  void read_unit(const Item& item) {
    const auto unit = read_text(item, problems());
    if (!unit) return;
    for (engine::PartModel& part : out_.all) part.unit = *unit;
  }

  const Fields& fields_;
  std::span<const engine::StateModel> states_;
  Context& context_;
  Parts out_;
  std::optional<std::size_t> length_;  ///< of `reads`, where it is a list
};

// Whether the symmetric matrix with ones on its diagonal and these pairs has a Cholesky factor whose pivots
// are well above rounding.
bool is_positive_definite(const std::vector<double>& pairs, std::size_t size) {
  constexpr double kLeastPivot = 1e-9;
  std::vector<double> factor(size * size, 0.0);
  for (std::size_t i = 0; i < size; ++i) {
    for (std::size_t j = i; j < size; ++j) {
      double sum = 1.0;
      if (j > i) sum = pairs[i * (2 * size - i - 1) / 2 + (j - i - 1)];
      for (std::size_t k = 0; k < i; ++k) sum -= factor[i * size + k] * factor[j * size + k];
      if (j == i && !(sum > kLeastPivot)) return false;
      factor[j * size + i] = j == i ? std::sqrt(sum) : sum / factor[i * size + i];
    }
  }
  return true;
}

}  // namespace

Parts read_parts(const Fields& fields, std::span<const engine::StateModel> states, Context& context) {
  return PartsReader(fields, states, context).read();
}

std::vector<double> read_pair_correlations(const Item& item, std::size_t parts, Problems& problems) {
  const std::size_t count = parts * (parts - 1) / 2;
  if (!item.node->is_list() || item.node->items.size() != count) {
    report_length(item, count, "one for each pair of parts, (1,2), (1,3) … (2,3) …", problems);
    return {};
  }
  std::vector<double> pairs;
  for (std::size_t i = 0; i < count; ++i) {
    const Item one{&item.node->items[i], item.path + "[" + std::to_string(i + 1) + "]"};
    if (const auto number = read_number(one, between(-1, 1), problems)) pairs.push_back(*number);
  }
  if (pairs.size() != count) return {};
  if (is_positive_definite(pairs, parts)) return pairs;
  problems.add(item.place(), item.path,
               "gives the parts correlations that no noise can have; their matrix must be positive definite");
  return {};
}

}  // namespace steelyard::rig
