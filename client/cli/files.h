// SPDX-License-Identifier: Apache-2.0
// Files that the commands read.
#pragma once

#include <cstdint>
#include <functional>
#include <istream>
#include <memory>
#include <string>

#include "cli/input.h"
#include "lib/log/log_csv.h"
#include "rig/rig.h"

namespace steelyard::client {

/// Reads and checks a rig file; null after telling stderr all that is wrong with it.
[[nodiscard]] std::shared_ptr<const rig::Rig> load_rig_file(const std::string& path);

/// A log that is open for reading; "-" is stdin.
struct LogFile {
  std::string name;  ///< for messages
  FileInput input;
  std::istream stream{&input};
  std::uint64_t bytes = 0;  ///< 0: not known
};
/// False after telling stderr why.
[[nodiscard]] bool open_log(const std::string& path, LogFile& log);

/// A log's names are those of the rig.
[[nodiscard]] LogReader::Find names_of(std::shared_ptr<const rig::Rig> rig);
/// Name of what a reading belongs to.
[[nodiscard]] const std::string& signal_name(const rig::Rig& rig, const rig::Signal& signal);
/// Why a reading that lies more than the horizon behind the newest one is refused.
[[nodiscard]] rig::Problem too_old(const rig::Rig& rig, const std::string& file, const LogRow& row,
                                   const LogReading& reading, double behind_s);

/// "steelyard: …" on stderr.
void complain(const std::string& message);

}  // namespace steelyard::client
