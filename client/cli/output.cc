// SPDX-License-Identifier: Apache-2.0
// Buffered writing by file descriptor, so that every error is seen.
#include "cli/output.h"

#include <fcntl.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cerrno>
#include <cstring>
#include <filesystem>
#include <system_error>
#include <utility>

namespace steelyard::client {
namespace {

constexpr std::size_t kBufferBytes = 64 * 1024;
constexpr unsigned kNewFileMode = 0666;  // less the umask, as for any new file

}  // namespace

Output::Output(std::string path) : path_(std::move(path)) {}

Output::~Output() {
  if (fd_ >= 0 && fd_ != STDOUT_FILENO) ::close(fd_);
  if (!temporary_.empty()) ::unlink(temporary_.c_str());
}

void Output::fail(const std::string& what) {
  if (error_.empty()) error_ = (path_.empty() ? "stdout" : path_) + ": " + what + ": " + std::strerror(errno);
}

bool Output::open() {
  if (path_.empty()) {
    fd_ = STDOUT_FILENO;
    return true;
  }
  std::error_code ignored;
  const std::filesystem::path real = std::filesystem::canonical(path_, ignored);
  target_ = ignored ? path_ : real.string();
  struct stat status {};
  if (::stat(target_.c_str(), &status) != 0) return open_temporary(target_, kNewFileMode);
  if (S_ISREG(status.st_mode)) return open_temporary(target_, status.st_mode & 0777U);
  fd_ = ::open(target_.c_str(), O_WRONLY | O_CLOEXEC);
  if (fd_ < 0) fail("cannot be written");
  return fd_ >= 0;
}

bool Output::open_temporary(const std::string& target, unsigned mode) {
  temporary_ = target + ".part-" + std::to_string(::getpid());
  fd_ = ::open(temporary_.c_str(), O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, mode);
  if (fd_ >= 0) return true;
  temporary_.clear();
  fail("cannot be written");
  return false;
}

void Output::write(std::string_view text) {
  buffer_ += text;
  if (buffer_.size() >= kBufferBytes) flush();
}

void Output::flush() {
  std::string_view left = buffer_;
  while (!left.empty() && !failed()) {
    const ssize_t written = ::write(fd_, left.data(), left.size());
    if (written >= 0) {
      left.remove_prefix(static_cast<std::size_t>(written));
    } else if (errno == EPIPE) {
      reader_gone_ = true;
    } else if (errno != EINTR) {
      fail("cannot be written");
    }
  }
  buffer_.clear();
}

bool Output::finish() {
  flush();
  if (!error_.empty()) return false;
  if (fd_ == STDOUT_FILENO) return true;
  if (!temporary_.empty() && ::fsync(fd_) != 0) fail("cannot be synced");
  if (::close(fd_) != 0) fail("cannot be closed");
  fd_ = -1;
  if (!error_.empty() || temporary_.empty()) return error_.empty();
  if (::rename(temporary_.c_str(), target_.c_str()) != 0) {
    fail("cannot be put in place");
    return false;
  }
  temporary_.clear();
  return true;
}

}  // namespace steelyard::client
