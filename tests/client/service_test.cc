// SPDX-License-Identifier: Apache-2.0
// feed and watch as programs, against a steelyardd: the same numbers as replay, exactly once, in order to the
// end.
#include <gtest/gtest.h>
#include <signal.h>

#include <algorithm>
#include <chrono>
#include <filesystem>
#include <memory>
#include <string>
#include <thread>
#include <vector>

#include "client/basin.h"
#include "client/process.h"

namespace steelyard::client {
namespace {

using Arguments = std::vector<std::string>;

bool has(const std::string& text, const std::string& part) { return text.find(part) != std::string::npos; }

class ServiceTest : public ::testing::Test {
 protected:
  void SetUp() override {
    std::filesystem::create_directory(folder_.path("rigs"));
    rig_ = folder_.write("rigs/basin.yaml", kBasinRig);
    rows_ = basin_rows(200, 100);
    log_ = folder_.write("log.csv", log_of(rows_));
    start("127.0.0.1:0");
  }

  void start(const std::string& listen) {
    std::filesystem::remove(folder_.path("port"));
    service_ = std::make_unique<Process>(
        folder_, Arguments{STEELYARD_SERVICE, "--data", folder_.path("data"), "--listen", listen, "--rigs",
                           folder_.path("rigs"), "--port-file", folder_.path("port")});
    ASSERT_TRUE(eventually([this] { return has(read_file(folder_.path("port")), "\n"); })) << service_->err();
    const std::string port = read_file(folder_.path("port"));
    address_ = "127.0.0.1:" + port.substr(0, port.find('\n'));
  }

  template <typename Condition>
  static bool eventually(const Condition& condition) {
    for (int i = 0; i < 3000; ++i) {
      if (condition()) return true;
      std::this_thread::sleep_for(std::chrono::milliseconds(10));
    }
    return false;
  }

  [[nodiscard]] Arguments feed(const std::string& log, Arguments more = {}) const {
    Arguments arguments{STEELYARD_COMMAND, "feed", "--to", address_, "--rig", "basin", "--log", log};
    arguments.insert(arguments.end(), more.begin(), more.end());
    return arguments;
  }
  [[nodiscard]] Arguments watch(Arguments more = {}) const {
    Arguments arguments{STEELYARD_COMMAND, "watch", "--from", address_, "--rig", "basin"};
    arguments.insert(arguments.end(), more.begin(), more.end());
    return arguments;
  }
  /// A watch that has begun: its connection stands before anything is fed.
  [[nodiscard]] std::unique_ptr<Process> begin_watch(Arguments more) const {
    auto process = std::make_unique<Process>(folder_, watch(std::move(more)));
    std::this_thread::sleep_for(std::chrono::milliseconds(1500));
    return process;
  }
  [[nodiscard]] Finished replay(Arguments more = {}) const {
    Arguments arguments{STEELYARD_COMMAND, "replay", "--rig", rig_, "--log", log_};
    arguments.insert(arguments.end(), more.begin(), more.end());
    return run(folder_, arguments);
  }

  Folder folder_;
  std::string rig_;
  std::vector<std::string> rows_;
  std::string log_;
  std::string address_;
  std::unique_ptr<Process> service_;
};

TEST_F(ServiceTest, WatchingAFeedGivesTheBytesOfReplay) {
  const auto watching = begin_watch({"--every-moment", "--until-idle", "2"});
  const Finished fed = run(folder_, feed(log_));
  EXPECT_EQ(fed.code, 0) << fed.err;
  EXPECT_EQ(fed.err, "");
  const Finished watched = watching->wait();
  EXPECT_EQ(watched.code, 0) << watched.err;
  EXPECT_EQ(watched.out, replay().out);
}

TEST_F(ServiceTest, WatchTellsTheSameWordsAsReplay) {
  const auto watching = begin_watch({"--every-moment", "--words", "--until-idle", "2"});
  EXPECT_EQ(run(folder_, feed(log_)).code, 0);
  const Finished watched = watching->wait();
  EXPECT_EQ(watched.code, 0) << watched.err;
  EXPECT_TRUE(has(watched.out, "Stretches in which a channel was not sound:\n  sonic: from 1700000"))
      << watched.out;
  EXPECT_EQ(watched.out, replay({"--words", "--out", folder_.path("o.csv")}).out);
}

TEST_F(ServiceTest, WhatWasFedOnceIsTakenOnce) {
  ASSERT_EQ(run(folder_, feed(log_)).code, 0);
  const Finished before = run(folder_, watch({"--once"}));
  const Finished again = run(folder_, feed(log_));
  EXPECT_EQ(again.code, 0);
  EXPECT_EQ(again.err, "steelyard: going on with reading 601\n");
  EXPECT_EQ(run(folder_, watch({"--once"})).out, before.out);
}

TEST_F(ServiceTest, AFeedThatWasStoppedGoesOn) {
  // The first half only, under the name and thus the source of the whole.
  const std::vector<std::string> half(rows_.begin(),
                                      rows_.begin() + 301);  // ends between two readings of one time
  ASSERT_EQ(run(folder_, feed(folder_.write("half.csv", log_of(half)), {"--source", "plc"})).code, 0);
  const Finished rest = run(folder_, feed(log_, {"--source", "plc"}));
  EXPECT_EQ(rest.code, 0);
  EXPECT_EQ(rest.err, "steelyard: going on with reading 302\n");
  const Finished shown = run(folder_, watch({"--once"}));
  const std::string replayed = replay().out;
  const std::string last = replayed.substr(replayed.rfind('\n', replayed.size() - 2) + 1);
  EXPECT_TRUE(has(shown.out, last)) << shown.out << last;
}

TEST_F(ServiceTest, WatchOnceShowsHeaderAndOneRow) {
  ASSERT_EQ(run(folder_, feed(log_)).code, 0);
  const Finished shown = run(folder_, watch({"--once"}));
  EXPECT_EQ(shown.code, 0);
  EXPECT_EQ(std::count(shown.out.begin(), shown.out.end(), '\n'), 2) << shown.out;
  const Finished words = run(folder_, watch({"--once", "--words"}));
  EXPECT_EQ(words.code, 0);
  EXPECT_EQ(std::count(words.out.begin(), words.out.end(), '\n'), 2) << words.out;
  EXPECT_TRUE(has(words.out, "1700000199.25  sonic ")) << words.out;
}

TEST_F(ServiceTest, AnInterruptedWatchEndsWith0AndItsSummary) {
  const auto watching = begin_watch({"--words"});
  ASSERT_EQ(run(folder_, feed(log_)).code, 0);
  std::this_thread::sleep_for(std::chrono::milliseconds(500));
  watching->signal(SIGINT);
  const Finished end = watching->wait();
  EXPECT_EQ(end.code, 0) << end.err;
  EXPECT_TRUE(has(end.out, "sound")) << end.out;
}

TEST_F(ServiceTest, WrongRowsAreRefusedAndTheOthersFed) {
  std::vector<std::string> rows = rows_;
  rows.insert(rows.begin() + 200, "1700000050,sonic,abc");
  rows.insert(rows.begin() + 200, "1700000050,sonar,1");
  const Finished fed = run(folder_, feed(folder_.write("mixed.csv", log_of(rows))));
  EXPECT_EQ(fed.code, 2);
  EXPECT_TRUE(has(fed.err, "2 refusals in the log")) << fed.err;
  const std::string replayed = replay().out;
  const std::string last = replayed.substr(replayed.rfind('\n', replayed.size() - 2) + 1);
  EXPECT_TRUE(has(run(folder_, watch({"--once"})).out, last));
}

TEST_F(ServiceTest, ARigThatIsNotThereIsWrongInput) {
  for (const char* command : {"feed", "watch"}) {
    Arguments arguments = command == std::string("feed") ? feed(log_) : watch();
    arguments[5] = "pond";
    const Finished end = run(folder_, arguments);
    EXPECT_EQ(end.code, 2) << end.err;
    EXPECT_TRUE(has(end.err, "pond")) << end.err;
  }
}

TEST_F(ServiceTest, APacedFeedTakesItsTime) {
  const std::vector<std::string> rows(rows_.begin(), rows_.begin() + 90);  // 30 s
  Process feeding(folder_, feed(folder_.write("short.csv", log_of(rows)), {"--pace", "x10"}));
  std::this_thread::sleep_for(std::chrono::milliseconds(1500));
  const std::string early = run(folder_, watch({"--once"})).out;
  EXPECT_FALSE(has(early, "\n1700000029")) << early;
  EXPECT_EQ(feeding.wait().code, 0);
  EXPECT_TRUE(has(run(folder_, watch({"--once"})).out, "\n1700000029.25,"));
}

TEST_F(ServiceTest, AnInterruptedFeedSaysHowFarItCame) {
  Process feeding(folder_, feed(log_, {"--pace", "real"}));
  std::this_thread::sleep_for(std::chrono::milliseconds(2500));
  feeding.signal(SIGTERM);
  const Finished end = feeding.wait();
  EXPECT_EQ(end.code, 1);
  EXPECT_TRUE(has(end.err, "stopped; everything up to reading ")) << end.err;
}

// 1. the feed runs; 2. the service is killed; 3. it comes back, empty, at the same port; 4. the feed ends
// with 0.
TEST_F(ServiceTest, AFeedGoesOnAfterTheServiceWasKilled) {
  Process feeding(folder_, feed(log_, {"--pace", "x40"}));
  std::this_thread::sleep_for(std::chrono::milliseconds(2000));
  service_->signal(SIGKILL);
  service_->wait();
  start(address_);
  const Finished end = feeding.wait();
  EXPECT_EQ(end.code, 0) << end.err;
  EXPECT_TRUE(has(end.err, "connection lost")) << end.err;
  EXPECT_TRUE(has(end.err, "connected again")) << end.err;
}

}  // namespace
}  // namespace steelyard::client
