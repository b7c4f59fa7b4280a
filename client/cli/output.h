// SPDX-License-Identifier: Apache-2.0
// Where results go: stdout, or a file that appears under its name only when it is complete.
#pragma once

#include <string>
#include <string_view>

namespace steelyard::client {

/// Writes to a temporary file beside `path` and renames it in finish(); without finish() nothing is left
/// behind. What exists and is no regular file (a pipe, a device) is written directly. An empty path is
/// stdout.
///
///   Output out(path);
///   if (!out.open()) return fail(out.error());
///   out.write(text);                    // errors are remembered; look at failed() now and then
///   if (!out.finish()) return fail(out.error());
class Output {
 public:
  explicit Output(std::string path);
  ~Output();
  Output(const Output&) = delete;
  Output& operator=(const Output&) = delete;

  [[nodiscard]] bool open();
  void write(std::string_view text);
  /// Passes on what is buffered.
  void flush();
  /// Everything is written, synced and in place. Also true if the reader of a pipe has gone.
  [[nodiscard]] bool finish();

  [[nodiscard]] bool failed() const { return !error_.empty() || reader_gone_; }
  /// The reader of stdout has had enough: not an error, but there is no use in going on.
  [[nodiscard]] bool reader_gone() const { return reader_gone_; }
  [[nodiscard]] const std::string& error() const { return error_; }

 private:
  bool open_temporary(const std::string& target, unsigned mode);
  void fail(const std::string& what);

  std::string path_;
  std::string target_;     // path_ with symbolic links followed
  std::string temporary_;  // empty: written directly
  int fd_ = -1;
  std::string buffer_;
  std::string error_;
  bool reader_gone_ = false;
};

}  // namespace steelyard::client
