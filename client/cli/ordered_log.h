// SPDX-License-Identifier: Apache-2.0
// A log as replay and feed want it: opened, checked, refused where wrong, in the order of time, with progress
// shown.
//
//   OrderedLog log(path, rig, "replay");
//   if (!log.open()) return kWrongInput;                // stderr has been told why
//   while (log.next(ready)) use(ready);
//   return log.close() ? kDone : kWrongInput;           // tells how much was refused
#pragma once

#include <memory>
#include <string>
#include <vector>

#include "cli/files.h"
#include "cli/progress.h"
#include "cli/refusals.h"
#include "lib/log/log_csv.h"
#include "lib/log/reorder.h"
#include "timeline/timeline.h"

namespace steelyard::client {

class OrderedLog {
 public:
  /// `file` must outlive this; `what` names the progress bar.
  OrderedLog(LogFile& file, std::shared_ptr<const rig::Rig> rig, const std::string& what);

  [[nodiscard]] bool open();
  /// The next readings that nothing can overtake, whole times only; false when there are no more, or the
  /// command was asked to end.
  [[nodiscard]] bool next(std::vector<timeline::Reading>& ready);
  /// Says how many were refused; true: none.
  bool close();

  [[nodiscard]] bool read_failed() const { return reader_.read_failed(); }
  void refuse(const rig::Problem& problem) { refusals_.add(problem); }
  [[nodiscard]] const std::string& name() const { return name_; }
  [[nodiscard]] Progress& progress() { return progress_; }

 private:
  void add(const LogRow& row);
  void wrong(const rig::Problem& problem);

  std::shared_ptr<const rig::Rig> rig_;
  std::string name_;
  Progress progress_;
  Refusals refusals_;
  Reorder reorder_;
  LogReader reader_;
  LogRow row_;
  bool header_is_read_ = false;
  bool at_end_ = false;
};

}  // namespace steelyard::client
