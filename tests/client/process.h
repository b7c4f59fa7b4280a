// SPDX-License-Identifier: Apache-2.0
// Running programs from tests: with files for what they say, ended by id.
#pragma once

#include <sys/types.h>

#include <filesystem>
#include <string>
#include <vector>

namespace steelyard::client {

/// A folder of its own for a test, removed with it.
class Folder {
 public:
  Folder();
  ~Folder();
  Folder(const Folder&) = delete;
  Folder& operator=(const Folder&) = delete;

  [[nodiscard]] std::string path(const std::string& name) const { return (folder_ / name).string(); }
  /// Writes a file and returns its path.
  std::string write(const std::string& name, const std::string& text) const;
  [[nodiscard]] std::vector<std::string> names() const;  ///< of its files, sorted

 private:
  std::filesystem::path folder_;
};

[[nodiscard]] std::string read_file(const std::string& path);

struct Finished {
  int code = -1;  ///< exit code; 128 + signal if a signal ended it
  std::string out;
  std::string err;
};

/// One program. The destructor ends it if it still runs.
class Process {
 public:
  /// stdin is /dev/null, or `input` if that names a file.
  Process(const Folder& folder, const std::vector<std::string>& arguments,
          const std::string& input = "/dev/null");
  ~Process();
  Process(const Process&) = delete;
  Process& operator=(const Process&) = delete;

  void signal(int number) const;
  Finished wait();
  [[nodiscard]] std::string out() const;  ///< so far
  [[nodiscard]] std::string err() const;

 private:
  std::string out_path_;
  std::string err_path_;
  pid_t id_ = -1;
};

/// Runs to the end.
[[nodiscard]] Finished run(const Folder& folder, const std::vector<std::string>& arguments,
                           const std::string& input = "/dev/null");

}  // namespace steelyard::client
