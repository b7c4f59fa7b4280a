// SPDX-License-Identifier: Apache-2.0
// Rows in steps: so many are read, then what is ready goes out.
#include "cli/ordered_log.h"

#include <cstdint>
#include <utility>

#include "cli/signals.h"

namespace steelyard::client {

OrderedLog::OrderedLog(LogFile& file, std::shared_ptr<const rig::Rig> rig, const std::string& what)
    : rig_(std::move(rig)),
      name_(file.name),
      progress_(what, file.bytes),
      refusals_(progress_),
      reorder_(*rig_),
      reader_(file.stream, file.name, names_of(rig_), [this](const rig::Problem& one) { wrong(one); }) {}

bool OrderedLog::open() {
  header_is_read_ = reader_.open();
  return header_is_read_;
}

/// Before the header is read every problem is shown; after it, they are counted.
void OrderedLog::wrong(const rig::Problem& problem) {
  if (header_is_read_) {
    refusals_.add(problem);
  } else {
    progress_.say(problem.text());
  }
}

bool OrderedLog::next(std::vector<timeline::Reading>& ready) {
  constexpr std::uint64_t kRowsPerStep = 256;
  ready.clear();
  for (bool more = true; more && ready.empty();) {
    for (std::uint64_t rows = 0; rows < kRowsPerStep && !at_end_; ++rows) {
      if (interrupted()) return false;
      at_end_ = !reader_.next(row_);
      if (!at_end_) add(row_);
    }
    progress_.show(reader_.bytes_read());
    more = !at_end_;
    if (at_end_) {
      reorder_.release_rest(ready);
    } else {
      reorder_.release(ready);
    }
  }
  return !ready.empty();
}

void OrderedLog::add(const LogRow& row) {
  for (const LogReading& reading : row.readings) {
    if (reorder_.add(reading)) continue;
    refusals_.add(too_old(*rig_, name_, row, reading, reorder_.behind_s(reading)));
  }
}

bool OrderedLog::close() {
  refusals_.close();
  return refusals_.count() == 0;
}

}  // namespace steelyard::client
