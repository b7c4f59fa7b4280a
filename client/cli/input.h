// SPDX-License-Identifier: Apache-2.0
// A file, a pipe or stdin for reading, which a request to end interrupts even while it waits for more.
#pragma once

#include <array>
#include <streambuf>
#include <string>

namespace steelyard::client {

/// A read error throws inside underflow(), which std::istream turns into bad().
class FileInput : public std::streambuf {
 public:
  FileInput() = default;
  ~FileInput() override;
  FileInput(const FileInput&) = delete;
  FileInput& operator=(const FileInput&) = delete;

  /// "-" is stdin. False: errno says why.
  [[nodiscard]] bool open(const std::string& path);

 protected:
  int_type underflow() override;

 private:
  int fd_ = -1;
  std::array<char, 64 * 1024> buffer_{};
};

}  // namespace steelyard::client
