// SPDX-License-Identifier: Apache-2.0
// Reading by file descriptor: std::ifstream goes on reading after a signal.
#include "cli/input.h"

#include <fcntl.h>
#include <unistd.h>

#include <cerrno>
#include <ios>
#include <system_error>

#include "cli/signals.h"

namespace steelyard::client {

FileInput::~FileInput() {
  if (fd_ > STDIN_FILENO) ::close(fd_);
}

bool FileInput::open(const std::string& path) {
  fd_ = path == "-" ? STDIN_FILENO : ::open(path.c_str(), O_RDONLY | O_CLOEXEC);
  return fd_ >= 0;
}

FileInput::int_type FileInput::underflow() {
  while (!interrupted()) {
    const ssize_t count = ::read(fd_, buffer_.data(), buffer_.size());
    if (count > 0) {
      setg(buffer_.data(), buffer_.data(), buffer_.data() + count);
      return traits_type::to_int_type(buffer_.front());
    }
    if (count == 0) break;
    if (errno != EINTR) {
      throw std::ios_base::failure("cannot be read", std::error_code(errno, std::generic_category()));
    }
  }
  return traits_type::eof();
}

}  // namespace steelyard::client
