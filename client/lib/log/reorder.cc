// SPDX-License-Identifier: Apache-2.0
// A heap by time; what lies more than a horizon behind the newest reading comes out.
#include "lib/log/reorder.h"

#include <algorithm>
#include <cmath>
#include <limits>

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
  heap_.push_back({key, arrivals_++, reading});
  std::push_heap(heap_.begin(), heap_.end(), later);
  return true;
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

void Reorder::release_until(TimeNs bound_ns, std::vector<timeline::Reading>& out) {
  while (!heap_.empty() && heap_.front().key_ns < bound_ns) pop(out);
  if (!any_released_ || bound_ns > released_ns_) released_ns_ = bound_ns;
  any_released_ = true;
}

void Reorder::release_rest(std::vector<timeline::Reading>& out) {
  while (!heap_.empty()) pop(out);
}

void Reorder::pop(std::vector<timeline::Reading>& out) {
  const LogReading& reading = heap_.front().reading;
  out.push_back({reading.time_ns, reading.signal, reading.value, reading.quality, 0, ++sequence_});
  std::pop_heap(heap_.begin(), heap_.end(), later);
  heap_.pop_back();
}

}  // namespace steelyard::client
