// SPDX-License-Identifier: Apache-2.0
// Order within one call; nothing that is older than what has been fused (rewinding is not there yet).
#include "timeline/timeline.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numeric>
#include <tuple>

#include "engine/time.h"

namespace steelyard::timeline {
namespace {

using engine::Quality;
using engine::TimeNs;

std::vector<int> name_ranks(const engine::Model& model) {
  std::vector<int> order(model.channels.size());
  std::iota(order.begin(), order.end(), 0);
  std::sort(order.begin(), order.end(), [&](int a, int b) {
    return model.channels[static_cast<std::size_t>(a)].name <
           model.channels[static_cast<std::size_t>(b)].name;
  });
  std::vector<int> rank(order.size());
  for (std::size_t i = 0; i < order.size(); ++i)
    rank[static_cast<std::size_t>(order[i])] = static_cast<int>(i);
  return rank;
}

bool all_finite(const Values& values) {
  const auto all = values.all();
  return std::all_of(all.begin(), all.end(), [](double value) { return std::isfinite(value); });
}

// A 4-20 mA transmitter tells its own failure by a current beyond the range (NAMUR NE 43, limits from
// memory).
bool failure_signal(const engine::ChannelModel& channel, double value) {
  if (!channel.live_zero) return false;
  const double span = channel.hi - channel.lo;
  return value < channel.lo - 0.025 * span || value > channel.lo + 1.0625 * span;
}

}  // namespace

Timeline::Timeline(std::shared_ptr<const rig::Rig> rig)
    : rig_(std::move(rig)),
      engine_(rig_->model),
      rank_(name_ranks(*rig_->model)),
      last_sources_(rig_->model->channels.size(), -1) {}

Timeline::Timeline(std::shared_ptr<const rig::Rig> rig, engine::Detail detail,
                   std::function<void(const engine::Estimate&)> settled)
    : Timeline(std::move(rig)) {
  engine::Settling settling;
  settling.lag_ns = engine::nanoseconds(rig_->lag_s);
  settling.detail = detail;
  settling.settled = std::move(settled);
  engine_ = engine::Engine(rig_->model, std::move(settling));
}

std::uint32_t Timeline::source_number(std::string_view name) {
  for (std::size_t i = 0; i < sources_.size(); ++i)
    if (sources_[i].name == name) return static_cast<std::uint32_t>(i);
  sources_.push_back({std::string(name), {}});
  return static_cast<std::uint32_t>(sources_.size() - 1);
}

std::uint64_t Timeline::position(std::uint32_t source) const { return sources_[source].taken.highest(); }

TimeNs Timeline::moment_of(const Reading& reading) const {
  if (reading.signal.is_input) return reading.time_ns;
  const auto& channel = rig_->model->channels[static_cast<std::size_t>(reading.signal.index)];
  TimeNs moment = 0;
  // A stamp near the beginning of all time stays there.
  if (__builtin_sub_overflow(reading.time_ns, engine::nanoseconds(channel.delay_s), &moment))
    return std::numeric_limits<TimeNs>::min();
  return moment;
}

bool Timeline::before(const Item& a, const Item& b) const {
  const Reading& ra = a.reading;
  const Reading& rb = b.reading;
  const auto rank = [&](const Reading& r) {
    return r.signal.is_input ? r.signal.index : rank_[static_cast<std::size_t>(r.signal.index)];
  };
  const auto key = [&](const Item& item, const Reading& r) {
    return std::make_tuple(item.moment_ns, !r.signal.is_input, rank(r));
  };
  const auto ka = key(a, ra);
  const auto kb = key(b, rb);
  if (ka != kb) return ka < kb;
  if (ra.source != rb.source) return sources_[ra.source].name < sources_[rb.source].name;
  return ra.sequence < rb.sequence;
}

void Timeline::run(std::span<Reading> batch, std::vector<Outcome>& outcomes, const OnMoment& on_moment) {
  items_.clear();
  // Twins are told apart in the order of arrival, before sorting.
  for (const Reading& r : batch)
    items_.push_back({r, moment_of(r), !sources_[r.source].taken.insert(r.sequence)});
  std::stable_sort(items_.begin(), items_.end(),
                   [this](const Item& a, const Item& b) { return before(a, b); });
  outcomes.resize(items_.size());
  bool open = false;
  TimeNs moment = 0;
  for (std::size_t i = 0; i < items_.size(); ++i) {
    batch[i] = items_[i].reading;
    if (open && items_[i].moment_ns != moment) {
      open = false;
      if (on_moment) on_moment(moment);
    }
    outcomes[i] = take(items_[i]);
    if (outcomes[i] < Outcome::kInput) {
      open = true;
      moment = items_[i].moment_ns;
    }
  }
  if (open && on_moment) on_moment(moment);
}

std::size_t Timeline::parts_of(const rig::Signal& signal) const {
  if (signal.is_input) return 1;
  return static_cast<std::size_t>(rig_->model->channels[static_cast<std::size_t>(signal.index)].parts());
}

Outcome Timeline::take(const Item& item) {
  const Reading& r = item.reading;
  if (item.duplicate) return Outcome::kDuplicate;
  if (r.values.size() != parts_of(r.signal)) return Outcome::kWrongParts;
  const bool usable = r.quality == Quality::kGood || r.quality == Quality::kUncertain;
  // A source may send any number with a reading that it calls bad.
  if (usable && !all_finite(r.values)) return Outcome::kNotFinite;
  if (engine_.started() && item.moment_ns < engine_.time()) return Outcome::kTooOld;
  clock_ns_ = started_ ? std::max(clock_ns_, r.time_ns) : r.time_ns;
  started_ = true;
  if (!r.signal.is_input) return take_channel(item);
  engine_.set_input(item.moment_ns, r.signal.index, r.values.first(), usable);
  return Outcome::kInput;
}

Outcome Timeline::take_channel(const Item& item) {
  const Reading& r = item.reading;
  const auto& channel = rig_->model->channels[static_cast<std::size_t>(r.signal.index)];
  const Quality quality = failure_signal(channel, r.values.first()) ? Quality::kBad : r.quality;
  // Who sent it tells the engine which channels can freeze together.
  const auto source = static_cast<int>(r.source);
  last_sources_[static_cast<std::size_t>(r.signal.index)] = source;
  switch (engine_.read(item.moment_ns, r.signal.index, r.values.all(), quality, source)) {
    case engine::Fate::kFused:
      return Outcome::kFused;
    case engine::Fate::kSameMeasurement:
      return Outcome::kSameMeasurement;
    case engine::Fate::kOutOfRange:
      return Outcome::kOutOfRange;
    case engine::Fate::kNotUsable:
      break;
  }
  return Outcome::kNotUsable;
}

void Timeline::estimate(TimeNs t, engine::Detail detail, engine::Estimate& out) {
  engine_.estimate(std::max(t, engine_.time()), detail, out);
}

TimeNs Timeline::clock() const { return clock_ns_; }
bool Timeline::started() const { return started_; }
const rig::Rig& Timeline::rig() const { return *rig_; }
const engine::Engine& Timeline::engine() const { return engine_; }

}  // namespace steelyard::timeline
