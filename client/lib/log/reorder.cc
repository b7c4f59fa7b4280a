// SPDX-License-Identifier: Apache-2.0
// A heap by time; what lies more than a horizon behind the newest reading comes out.
#include "lib/log/reorder.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <span>

namespace steelyard::client {
namespace {

using engine::TimeNs;

constexpr double kNsPerS = 1e9;
constexpr double kLongestS = 4e9;  // more than a century: nothing is older than that

TimeNs to_ns(double seconds) { return std::llround(std::clamp(seconds, 0.0, kLongestS) * kNsPerS); }

/// a − b, held at the ends of the range rather than wrapped.
TimeNs minus(TimeNs a, TimeNs b) {
  TimeNs result = 0;
  if (!__builtin_sub_overflow(a, b, &result)) return result;
  return b > 0 ? std::numeric_limits<TimeNs>::min() : std::numeric_limits<TimeNs>::max();
}

}  // namespace

Reorder::Reorder(const rig::Rig& rig, std::size_t max_waiting)
    : horizon_ns_(to_ns(rig.horizon_s)), max_waiting_(max_waiting) {
  for (const engine::ChannelModel& channel : rig.model->channels) {
    delay_ns_.push_back(to_ns(channel.delay_s));
    longest_delay_ns_ = std::max(longest_delay_ns_, delay_ns_.back());
    stride_ = std::max(stride_, static_cast<std::size_t>(channel.parts()));
  }
}

bool Reorder::later(const Waiting& a, const Waiting& b) {
  return a.key_ns != b.key_ns ? a.key_ns > b.key_ns : a.arrival > b.arrival;
}

TimeNs Reorder::key_ns(const LogReading& reading) const {
  if (reading.signal.is_input) return reading.time_ns;
  return minus(reading.time_ns, delay_ns_[static_cast<std::size_t>(reading.signal.index)]);
}

double Reorder::behind_s(const LogReading& reading) const {
  return static_cast<double>(minus(newest_ns_, reading.time_ns)) / kNsPerS;
}

bool Reorder::add(const LogReading& reading) {
  const bool first = arrivals_ == 0;
  if (!first && reading.time_ns < minus(newest_ns_, horizon_ns_)) return false;
  const TimeNs key = key_ns(reading);
  if (any_released_ && key < released_ns_) return false;
  newest_ns_ = first ? reading.time_ns : std::max(newest_ns_, reading.time_ns);
  const auto parts = std::min(reading.values.size(), stride_);
  heap_.push_back({key, arrivals_++, reading.time_ns, reading.signal, reading.quality,
                   static_cast<std::uint8_t>(parts), put(reading.values)});
  std::push_heap(heap_.begin(), heap_.end(), later);
  return true;
}

/// The slot in which they stand now.
std::uint32_t Reorder::put(const timeline::Values& values) {
  if (free_slots_.empty()) {
    free_slots_.push_back(static_cast<std::uint32_t>(values_.size() / stride_));
    values_.resize(values_.size() + stride_);
  }
  const std::uint32_t slot = free_slots_.back();
  free_slots_.pop_back();
  const auto all = values.all();
  std::copy_n(all.begin(), std::min(all.size(), stride_),
              values_.begin() + static_cast<std::ptrdiff_t>(slot * stride_));
  return slot;
}

/// No acceptable reading can have a key before this.
TimeNs Reorder::bound_ns() const { return minus(minus(newest_ns_, horizon_ns_), longest_delay_ns_); }

void Reorder::release(std::vector<timeline::Reading>& out) {
  release_until(bound_ns(), out);
  while (heap_.size() > max_waiting_) {
    const TimeNs oldest = heap_.front().key_ns;
    release_until(oldest < std::numeric_limits<TimeNs>::max() ? oldest + 1 : oldest, out);
    if (!heap_.empty() && heap_.front().key_ns == oldest) break;
  }
}

bool Reorder::may_pop(const std::vector<timeline::Reading>& out, std::size_t before) const {
  const std::size_t count = out.size() - before;
  return !heap_.empty() && (count < kMostAtOnce || heap_.front().key_ns == popped_ns_);
}

void Reorder::release_until(TimeNs bound_ns, std::vector<timeline::Reading>& out) {
  const std::size_t before = out.size();
  while (may_pop(out, before) && heap_.front().key_ns < bound_ns) pop(out);
  const TimeNs done_ns = heap_.empty() ? bound_ns : std::min(bound_ns, heap_.front().key_ns);
  if (!any_released_ || done_ns > released_ns_) released_ns_ = done_ns;
  any_released_ = true;
}

void Reorder::release_rest(std::vector<timeline::Reading>& out) {
  const std::size_t before = out.size();
  while (may_pop(out, before)) pop(out);
}

void Reorder::pop(std::vector<timeline::Reading>& out) {
  const Waiting& one = heap_.front();
  popped_ns_ = one.key_ns;
  const std::span<const double> slots(values_);
  const timeline::Values values(slots.subspan(one.slot * stride_, one.parts));
  out.push_back({one.time_ns, one.signal, values, one.quality, 0, ++sequence_});
  free_slots_.push_back(one.slot);
  std::pop_heap(heap_.begin(), heap_.end(), later);
  heap_.pop_back();
}

}  // namespace steelyard::client
