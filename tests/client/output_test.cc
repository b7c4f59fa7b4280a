// SPDX-License-Identifier: Apache-2.0
// Files appear when they are complete and not before.
#include "cli/output.h"

#include <fcntl.h>
#include <gtest/gtest.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <unistd.h>

#include <array>
#include <csignal>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <string>

namespace steelyard::client {
namespace {

namespace fs = std::filesystem;

std::string read_file(const fs::path& path) {
  std::ifstream file(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(file), {}};
}

class OutputTest : public ::testing::Test {
 protected:
  void SetUp() override {
    std::string name = (fs::temp_directory_path() / "steelyard-output-XXXXXX").string();
    ASSERT_NE(::mkdtemp(name.data()), nullptr);
    folder_ = name;
  }
  void TearDown() override { fs::remove_all(folder_); }
  [[nodiscard]] std::size_t files() const {
    return static_cast<std::size_t>(std::distance(fs::directory_iterator(folder_), fs::directory_iterator()));
  }
  fs::path folder_;
};

TEST_F(OutputTest, AppearsAtFinish) {
  const fs::path path = folder_ / "out.csv";
  Output out(path);
  ASSERT_TRUE(out.open());
  out.write("a,b\n");
  out.flush();
  EXPECT_FALSE(fs::exists(path));
  EXPECT_TRUE(out.finish());
  EXPECT_EQ(read_file(path), "a,b\n");
  EXPECT_EQ(files(), 1U);
}

TEST_F(OutputTest, WithoutFinishNothingIsLeftAndTheOldFileStands) {
  const fs::path path = folder_ / "out.csv";
  std::ofstream(path) << "old";
  {
    Output out(path);
    ASSERT_TRUE(out.open());
    out.write(std::string(1'000'000, 'x'));
    EXPECT_EQ(files(), 2U);
  }
  EXPECT_EQ(read_file(path), "old");
  EXPECT_EQ(files(), 1U);
}

TEST_F(OutputTest, KeepsTheModeAndTheSymbolicLinkOfAnOldFile) {
  const fs::path path = folder_ / "out.csv";
  const fs::path link = folder_ / "link.csv";
  std::ofstream(path) << "old";
  fs::permissions(path, fs::perms::owner_read | fs::perms::owner_write);
  fs::create_symlink(path, link);
  Output out(link);
  ASSERT_TRUE(out.open());
  out.write("new");
  ASSERT_TRUE(out.finish());
  EXPECT_TRUE(fs::is_symlink(link));
  EXPECT_EQ(read_file(path), "new");
  EXPECT_EQ(fs::status(path).permissions(), fs::perms::owner_read | fs::perms::owner_write);
}

// A pipe of our own stands for all that is no regular file: were the code wrong, a test on a real device
// would replace it.
TEST_F(OutputTest, WhatIsNoRegularFileIsWrittenDirectly) {
  const fs::path path = folder_ / "pipe";
  ASSERT_EQ(::mkfifo(path.c_str(), 0600), 0);
  const int reader = ::open(path.c_str(), O_RDONLY | O_NONBLOCK | O_CLOEXEC);
  ASSERT_GE(reader, 0);
  Output out(path);
  ASSERT_TRUE(out.open());
  out.write("abc");
  EXPECT_TRUE(out.finish());
  std::array<char, 8> got{};
  EXPECT_EQ(::read(reader, got.data(), got.size()), 3);
  ::close(reader);
  EXPECT_TRUE(fs::is_fifo(path));
  EXPECT_EQ(files(), 1U);
}

/// While it lives, files cannot grow beyond a few bytes: as on a full disk, writes fail.
class SmallFiles {
 public:
  SmallFiles() : handler_(std::signal(SIGXFSZ, SIG_IGN)) {
    ::getrlimit(RLIMIT_FSIZE, &before_);
    rlimit small = before_;
    small.rlim_cur = 4;
    ::setrlimit(RLIMIT_FSIZE, &small);
  }
  ~SmallFiles() {
    ::setrlimit(RLIMIT_FSIZE, &before_);
    std::signal(SIGXFSZ, handler_);
  }
  SmallFiles(const SmallFiles&) = delete;
  SmallFiles& operator=(const SmallFiles&) = delete;

 private:
  rlimit before_{};
  void (*handler_)(int);
};

TEST_F(OutputTest, AFailedWriteIsToldAndNotTakenForSuccess) {
  const fs::path path = folder_ / "out.csv";
  bool finished = true;
  std::string error;
  {
    Output out(path);
    ASSERT_TRUE(out.open());
    const SmallFiles small;
    out.write("more than four bytes");
    finished = out.finish();
    error = out.error();
  }
  EXPECT_FALSE(finished);
  EXPECT_EQ(error, path.string() + ": cannot be written: File too large");
  EXPECT_EQ(files(), 0U);
}

TEST_F(OutputTest, AFolderThatIsNotThereIsTold) {
  Output out(folder_ / "none" / "out.csv");
  EXPECT_FALSE(out.open());
  EXPECT_NE(out.error().find("cannot be written: No such file or directory"), std::string::npos)
      << out.error();
}

}  // namespace
}  // namespace steelyard::client
