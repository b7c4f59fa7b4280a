// SPDX-License-Identifier: Apache-2.0
// Every bound of the service in one place, with what happens at it.
#pragma once

#include <chrono>
#include <cstddef>
#include <cstdint>

namespace steelyard::service {

struct Limits {
  // Beyond these a request is answered with RESOURCE_EXHAUSTED.
  std::size_t rigs = 10'000;
  std::size_t feeds_per_rig = 64;
  std::size_t watches_per_rig = 256;
  std::size_t sources_per_rig = 4096;    ///< ever seen: their positions are remembered
  std::size_t questions_per_rig = 4096;  ///< waiting calls (estimates, openings of watches, changes)

  // Beyond these a request is answered with INVALID_ARGUMENT.
  std::size_t rig_bytes = 1 << 20;
  std::size_t batch_readings = 65'536;
  std::size_t feed_channels = 4096;
  std::size_t name_bytes = 255;  ///< source, author
  std::size_t reason_bytes = 4096;
  double watch_rate_hz = 1000.0;

  // A mailbox that holds this much stops reading its feeds until it is half empty. Each feed may add one
  // message more, the one that was being read meanwhile.
  std::size_t mailbox_readings = 131'072;
  std::size_t mailbox_messages = 1024;

  std::size_t revisions = 100;       ///< of a rig, the newest; older ones are forgotten
  std::size_t list_page = 1000;      ///< rigs in one answer
  std::size_t refused_listed = 100;  ///< refusals in one answer; the others are counted
  std::size_t problem_bytes = 4096;  ///< of a status message; headers have a limit of 8 KiB
  std::size_t chunk_moments = 64;    ///< distinct reading times that a rig runs before others have their turn
  std::size_t chunk_readings = 512;  ///< readings likewise, as soon as the time changes
  std::size_t moments_waiting =
      1024;  ///< for a watch of every moment; its rig waits while it is more than half full

  std::int64_t ahead_ns = 60'000'000'000;      ///< readings further ahead of the service's clock are refused
  std::chrono::milliseconds shutdown{10'000};  ///< then what is still open is cut off
};

/// Reading times before this (the year 1896) are refused, so that differences of two times never overflow.
inline constexpr std::int64_t kOldestTimeNs = -(std::int64_t{1} << 61);

/// Pace of a watch that asks for none.
inline constexpr double kDefaultWatchRateHz = 10.0;

}  // namespace steelyard::service
