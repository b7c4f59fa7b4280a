// SPDX-License-Identifier: Apache-2.0
// Files appear when they are complete and not before.
#include "cli/output.h"

#include <gtest/gtest.h>
#include <sys/stat.h>
#include <unistd.h>

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

TEST_F(OutputTest, ADeviceIsWrittenDirectly) {
  Output out("/dev/null");
  ASSERT_TRUE(out.open());
  out.write("x");
  EXPECT_TRUE(out.finish());
  struct stat status {};
  ASSERT_EQ(::stat("/dev/null", &status), 0);
  EXPECT_TRUE(S_ISCHR(status.st_mode));
}

TEST_F(OutputTest, AFullDiskIsToldAndNotTakenForSuccess) {
  if (!fs::exists("/dev/full")) GTEST_SKIP() << "no /dev/full here";
  Output out("/dev/full");
  ASSERT_TRUE(out.open());
  out.write("x");
  EXPECT_FALSE(out.finish());
  EXPECT_EQ(out.error(), "/dev/full: cannot be written: No space left on device");
}

TEST_F(OutputTest, AFolderThatIsNotThereIsTold) {
  Output out(folder_ / "none" / "out.csv");
  EXPECT_FALSE(out.open());
  EXPECT_NE(out.error().find("cannot be written: No such file or directory"), std::string::npos)
      << out.error();
}

}  // namespace
}  // namespace steelyard::client
