// SPDX-License-Identifier: Apache-2.0
// The command as a program: check and replay, exit codes, files, messages. The service's side is in
// service_test.cc.
#include <fcntl.h>
#include <gtest/gtest.h>
#include <signal.h>
#include <sys/stat.h>
#include <unistd.h>

#include <algorithm>
#include <chrono>
#include <cmath>
#include <cstdint>
#include <sstream>
#include <string>
#include <thread>
#include <vector>

#include "client/basin.h"
#include "client/process.h"

namespace steelyard::client {
namespace {

using Arguments = std::vector<std::string>;

class CommandTest : public ::testing::Test {
 protected:
  void SetUp() override {
    rig_ = folder_.write("basin.yaml", kBasinRig);
    rows_ = basin_rows(200, 100);
    log_ = folder_.write("log.csv", log_of(rows_));
  }
  [[nodiscard]] Finished steelyard(Arguments arguments, const std::string& input = "/dev/null") const {
    arguments.insert(arguments.begin(), STEELYARD_COMMAND);
    return run(folder_, arguments, input);
  }
  [[nodiscard]] Finished replay(const std::string& log, Arguments more = {}) const {
    Arguments arguments{"replay", "--rig", rig_, "--log", log};
    arguments.insert(arguments.end(), more.begin(), more.end());
    return steelyard(arguments);
  }

  Folder folder_;
  std::string rig_;
  std::vector<std::string> rows_;
  std::string log_;
};

std::size_t lines(const std::string& text) {
  return static_cast<std::size_t>(std::count(text.begin(), text.end(), '\n'));
}

bool has(const std::string& text, const std::string& part) { return text.find(part) != std::string::npos; }

TEST_F(CommandTest, WrongUsageIs2AndHelpIs0) {
  const std::vector<Arguments> wrong{
      {},
      {"weigh"},
      {"check"},
      {"replay"},
      {"replay", "--rig", rig_},
      {"replay", "--rig", rig_, "--log", log_, "--time", "noon"},
      {"replay", "--rig", rig_, "--log", log_, "--report", "r.html"},
      {"replay", "--rig", rig_, "--log", log_, "--out", "same", "--episodes", "same"},
      {"replay", "--rig", rig_, "--log", log_, "--out", "same", "--channels", "same"},
      {"replay", "--rig", rig_, "--log", folder_.path("none.csv")},
      {"replay", "--rig", rig_, "--log", folder_.path("")},
      {"replay", "--rig", folder_.path("none.yaml"), "--log", log_},
      {"check", folder_.path("none.yaml")},
      {"feed", "--to", "localhost:1", "--rig", "basin", "--log", log_, "--pace", "slow"},
      {"feed", "--to", "localhost:1", "--rig", "basin", "--log", "-"},
      {"watch", "--from", "localhost:1", "--rig", "basin", "--until-idle", "soon"},
  };
  for (const Arguments& arguments : wrong) {
    const Finished end = steelyard(arguments);
    EXPECT_EQ(end.code, 2) << end.err;
    EXPECT_EQ(end.out, "");
    EXPECT_NE(end.err, "");
  }
  for (const char* command : {"check", "replay", "feed", "watch"})
    EXPECT_EQ(steelyard({command, "--help"}).code, 0);
  EXPECT_EQ(steelyard({"--help"}).code, 0);
  EXPECT_EQ(steelyard({"--version"}).code, 0);
}

TEST_F(CommandTest, CheckSaysWhatTheRigMeans) {
  const Finished end = steelyard({"check", rig_});
  EXPECT_EQ(end.code, 0);
  EXPECT_EQ(end.err, "");
  EXPECT_TRUE(has(end.out, "rig basin: 2 states, 1 input, 2 channels\n")) << end.out;
  EXPECT_TRUE(has(end.out, "motion    linear")) << end.out;
  EXPECT_TRUE(has(end.out, "shows alone  level, inflow (rank 2 of 2)")) << end.out;
  EXPECT_TRUE(has(end.out, "every 30 d (720 h)")) << end.out;
  EXPECT_TRUE(has(end.out, "pump: has no period")) << end.out;
  EXPECT_TRUE(has(end.out, "\n  without  level (m)")) << end.out;
  EXPECT_TRUE(has(end.out, "\n  none     0.0")) << end.out;
  EXPECT_TRUE(has(end.out, "\n  sonic    0.0")) << end.out;
  EXPECT_TRUE(has(end.out, "channels of one source: share 0.1 of their freezes")) << end.out;
  EXPECT_TRUE(has(end.out, "is no safety function")) << end.out;
}

constexpr const char* kYardRig = R"(rig: yard
response: 10 s
states:
  east:  {unit: m, start: 0, start_sd: 50}
  north: {unit: m, start: 0, start_sd: 50}
unrest: {east: 0.05, north: 0.05}
common: [{channels: [tape, rod], share: 0.2}]
freeze_share: 0.3
channels:
  fix:  {reads: [east, north], sd: [0.5, 0.5], range: [[-99, 99], [-99, 99]], resolution: 0.01, period: 1 s,
         correlation: [0.4], time_sd: 20 ms}
  tape: {reads: east, sd: 0.2, range: [-99, 99], resolution: 0.01, period: 1 s, correlation: 0.5}
  rod:  {reads: east, sd: 0.2, range: [-99, 99], resolution: 0.01, on_change: {deadband: 1, heartbeat: 1 min}}
)";

TEST_F(CommandTest, CheckTellsWhatIsLostWithoutEachChannelAndPair) {
  const Finished end = steelyard({"check", folder_.write("yard.yaml", kYardRig)});
  ASSERT_EQ(end.code, 0) << end.err;
  const auto row = [&](const std::string& without) {
    const std::size_t at = end.out.find("\n  " + without + " ");
    EXPECT_NE(at, std::string::npos) << without << end.out;
    return at == std::string::npos ? std::string() : end.out.substr(at + 1, end.out.find('\n', at + 1) - at);
  };
  EXPECT_TRUE(has(row("without"), "east (m)"));
  EXPECT_FALSE(has(row("none"), "lost")) << row("none");
  EXPECT_TRUE(has(row("fix"), "  lost")) << row("fix");
  EXPECT_FALSE(has(row("tape, rod"), "lost")) << row("tape, rod");
  EXPECT_TRUE(has(end.out, "reads        fix.1: linear, sd 0.5 m")) << end.out;
  EXPECT_TRUE(has(end.out, "noise of the parts correlated: 0.4\n")) << end.out;
  EXPECT_TRUE(has(end.out, "times uncertain by 20 ms\n")) << end.out;
  EXPECT_TRUE(has(end.out, "sends when it has moved by 1 m, or after 60 s\n")) << end.out;
  EXPECT_TRUE(has(end.out, "tape, rod: share 0.2 of their faults\n")) << end.out;
  EXPECT_TRUE(has(end.out, "share 0.3 of their freezes\n")) << end.out;
  EXPECT_TRUE(has(end.out, "rod has no period; here it reads every 0.2 s\n")) << end.out;
}

/// A slow drive east: fix (never wrong) and tape, which from `fault_s` on reads 5 m too much.
std::string yard_log(int seconds, int fault_s) {
  std::string text = "time,fix.1,fix.2,tape\n";
  std::uint64_t state = 7;
  const auto noise = [&state](double sd) {  // sum of four uniform numbers, in hundredths
    double sum = 0.0;
    for (int i = 0; i < 4; ++i) {
      state = state * 6364136223846793005U + 1442695040888963407U;
      sum += static_cast<double>(state >> 11U) * 0x1p-53 - 0.5;
    }
    return std::round(100.0 * sd * std::sqrt(3.0) * sum) / 100.0;
  };
  for (int s = 0; s < seconds; ++s) {
    text += std::to_string(1'700'000'000 + s);
    const double east = 10.0 + 0.05 * s;  // a machine that stands still could not tell offset from stuck
    for (const double value :
         {east + noise(0.5), -20.0 + noise(0.5), east + noise(0.2) + (s >= fault_s ? 5.0 : 0.0)}) {
      text += ',';
      append_number(text, value);
    }
    text += '\n';
  }
  return text;
}

TEST_F(CommandTest, ReplayTakesVectorChannelsAndWritesARowForEachPart) {
  const std::string rig = folder_.write("yard.yaml", kYardRig);
  const std::string log = folder_.write("yard.csv", yard_log(60, 1000));
  const Finished end = steelyard({"replay", "--rig", rig, "--log", log, "--channels", folder_.path("c.csv")});
  EXPECT_EQ(end.code, 0) << end.err;
  EXPECT_TRUE(has(end.out, "time,east,east.sd,north,north.sd,trust.fix,trust.tape,trust.rod\n"));
  const std::string rows = read_file(folder_.path("c.csv"));
  EXPECT_EQ(lines(rows), 1 + 60 * 4U);
  const auto last = [&rows](const std::string& name) {
    const std::size_t at = rows.rfind("1700000059," + name + ",");
    return at == std::string::npos ? std::string() : rows.substr(at, rows.find('\n', at) - at);
  };
  for (const char* name : {"fix.1", "fix.2", "tape", "rod"}) EXPECT_NE(last(name), "") << name;
  const auto trust = [&](const std::string& name) {
    const std::size_t begin = last(name).find(name) + name.size() + 1;
    return last(name).substr(begin, last(name).find(',', begin) - begin);
  };
  EXPECT_EQ(trust("fix.1"), trust("fix.2")) << "parts share the channel's trust";
  EXPECT_NE(last("fix.1"), last("fix.2"));
}

TEST_F(CommandTest, ALogWithAWrongPartIsRefusedThereAlone) {
  const std::string rig = folder_.write("yard.yaml", kYardRig);
  const std::string log = folder_.write(
      "parts.csv", "time,channel,value,value2\n1,fix,10,-20\n2,fix,10,\n3,fix,10,x\n4,tape,10,\n");
  const Finished end = steelyard({"replay", "--rig", rig, "--log", log});
  EXPECT_EQ(end.code, 2);
  EXPECT_EQ(lines(end.out), 3U) << end.out;
  EXPECT_TRUE(has(end.err, "parts.csv:3:10: fix.2: is empty; must be a number\n")) << end.err;
  EXPECT_TRUE(has(end.err, "parts.csv:4:10: fix.2: is \"x\"; must be a number\n")) << end.err;
}

TEST_F(CommandTest, EpisodesTellWhatWasNotSound) {
  const std::string rig = folder_.write("yard.yaml", kYardRig);
  const std::string log = folder_.write("yard.csv", yard_log(200, 100));
  const std::string path = folder_.path("e.csv");
  const Arguments arguments{"replay", "--rig", rig, "--log", log, "--out", folder_.path("o.csv")};
  Arguments with_episodes = arguments;
  with_episodes.insert(with_episodes.end(), {"--episodes", path});
  ASSERT_EQ(steelyard(with_episodes).code, 0);
  const std::string text = read_file(path);
  EXPECT_TRUE(text.starts_with(
      "id,channel,from,to,kind,size,size.lo,size.hi,probability,rival,rival.probability,cause\n"));
  std::istringstream stream(text);
  std::string row;
  std::string tape;
  while (std::getline(stream, row)) {
    EXPECT_EQ(std::count(row.begin(), row.end(), ','), 11) << row;
    if (has(row, ",tape,")) tape = row;
  }
  // One spell, still going on, of about 5 m, from about when it began.
  EXPECT_TRUE(has(tape, ",tape,17000001") || has(tape, ",tape,170000009")) << text;
  EXPECT_TRUE(has(tape, ",,offset,") || has(tape, ",,creeping,") || has(tape, ",,wandering,")) << text;
  std::vector<std::string> cells;
  std::istringstream tape_stream(tape);
  for (std::string cell; std::getline(tape_stream, cell, ',');) cells.push_back(cell);
  ASSERT_EQ(cells.size(), 12U);
  EXPECT_NEAR(std::stod(cells[5]), 5.0, 0.8) << tape;
  EXPECT_LT(std::stod(cells[6]), std::stod(cells[5]));
  EXPECT_GT(std::stod(cells[7]), std::stod(cells[5]));
  EXPECT_GT(std::stod(cells[8]), 0.5);
  EXPECT_NE(cells[9], "");
  // Nothing about them decides estimates, and they are the same each time.
  const std::string estimates = read_file(folder_.path("o.csv"));
  ASSERT_EQ(steelyard(arguments).code, 0);
  EXPECT_EQ(read_file(folder_.path("o.csv")), estimates);
  ASSERT_EQ(steelyard(with_episodes).code, 0);
  EXPECT_EQ(read_file(path), text);
}

TEST_F(CommandTest, ALogWithoutFaultsHasNoEpisodes) {
  const std::string log = folder_.write("sound.csv", log_of(basin_rows(100, 1000)));
  ASSERT_EQ(replay(log, {"--out", folder_.path("o.csv"), "--episodes", folder_.path("e.csv")}).code, 0);
  EXPECT_EQ(lines(read_file(folder_.path("e.csv"))), 1U);
  EXPECT_EQ(replay(log, {"--out", folder_.path("o.csv"), "--episodes", "/nowhere/e.csv"}).code, 1);
}

TEST_F(CommandTest, CheckListsEveryProblemAndEndsWith2) {
  std::string text = kBasinRig;
  text.replace(text.find("sd: 0.01"), 8, "sd: -1.0");
  text.replace(text.rfind("sd: 0.01"), 8, "sd: -2.0");
  const Finished end = steelyard({"check", folder_.write("wrong.yaml", text)});
  EXPECT_EQ(end.code, 2);
  EXPECT_EQ(end.out, "");
  EXPECT_EQ(lines(end.err), 2U) << end.err;
  EXPECT_TRUE(has(end.err, "wrong.yaml:")) << end.err;
}

TEST_F(CommandTest, ReplayWritesOneRowPerReadingTime) {
  const Finished end = replay(log_);
  EXPECT_EQ(end.code, 0) << end.err;
  EXPECT_EQ(end.err, "");
  EXPECT_EQ(end.out.substr(0, end.out.find('\n')),
            "time,level,level.sd,inflow,inflow.sd,trust.sonic,trust.radar");
  EXPECT_EQ(lines(end.out), 1 + 2 * 200U);
  EXPECT_TRUE(has(end.out, "\n1700000000,"));
  EXPECT_TRUE(has(end.out, "\n1700000199.25,"));
}

TEST_F(CommandTest, SettledRowsStandForTheSameTimesAndKnowMore) {
  const Finished live = replay(log_);
  const Finished settled = replay(log_, {"--settled"});
  EXPECT_EQ(settled.code, 0) << settled.err;
  EXPECT_EQ(settled.err, "");
  EXPECT_EQ(lines(settled.out), lines(live.out));
  const auto times = [](const std::string& text) {
    std::string out;
    for (std::size_t i = 0; i < text.size(); i = text.find('\n', i) + 1)
      out += text.substr(i, text.find(',', i) - i) + '\n';
    return out;
  };
  EXPECT_EQ(times(settled.out), times(live.out));
  EXPECT_NE(settled.out, live.out);
  EXPECT_EQ(replay(log_, {"--settled", "--channels", folder_.path("c.csv")}).out, settled.out);
  EXPECT_EQ(lines(read_file(folder_.path("c.csv"))), 1 + 2 * 2 * 200U);
}

TEST_F(CommandTest, ReplayIsTheSameBytesTwiceAndInAFile) {
  const Finished first = replay(log_, {"--channels", folder_.path("c1.csv")});
  const Finished second =
      replay(log_, {"--out", folder_.path("o.csv"), "--channels", folder_.path("c2.csv")});
  EXPECT_EQ(first.code, 0);
  EXPECT_EQ(second.code, 0);
  EXPECT_EQ(second.out, "");
  EXPECT_EQ(first.out, read_file(folder_.path("o.csv")));
  EXPECT_EQ(read_file(folder_.path("c1.csv")), read_file(folder_.path("c2.csv")));
  EXPECT_EQ(replay(log_).out, first.out);  // whether or not the channels are asked for
}

TEST_F(CommandTest, ReplayDoesNotDependOnTheOrderWithinTheHorizon) {
  std::vector<std::string> shuffled = rows_;
  for (std::size_t i = 0; i + 20 < shuffled.size(); i += 20) {
    std::reverse(shuffled.begin() + static_cast<std::ptrdiff_t>(i),
                 shuffled.begin() + static_cast<std::ptrdiff_t>(i + 20));
  }
  const Finished end = replay(folder_.write("shuffled.csv", log_of(shuffled)));
  EXPECT_EQ(end.code, 0) << end.err;
  EXPECT_EQ(end.out, replay(log_).out);
}

TEST_F(CommandTest, ReplayTakesTheWideFormAndStdin) {
  const std::string wide = "time,pump,sonic,radar\n1700000000,0,2.01,2.0\n1700000001,,2.02,\n";
  const std::string longer =
      "time,channel,value\n1700000000,pump,0\n1700000000,radar,2.0\n1700000000,sonic,2.01\n1700000001,sonic,"
      "2.02\n";
  const Finished one = replay(folder_.write("wide.csv", wide));
  const Finished other =
      steelyard({"replay", "--rig", rig_, "--log", "-"}, folder_.write("long.csv", longer));
  EXPECT_EQ(one.code, 0) << one.err;
  EXPECT_EQ(lines(one.out), 3U);
  EXPECT_EQ(one.out, other.out);
}

TEST_F(CommandTest, ChannelRowsHaveAllColumns) {
  ASSERT_EQ(replay(log_, {"--out", folder_.path("o.csv"), "--channels", folder_.path("c.csv")}).code, 0);
  const std::string text = read_file(folder_.path("c.csv"));
  EXPECT_EQ(lines(text), 1 + 2 * 2 * 200U);
  std::size_t begin = 0;
  while (begin < text.size()) {
    const std::size_t end = text.find('\n', begin);
    EXPECT_EQ(std::count(text.begin() + static_cast<std::ptrdiff_t>(begin),
                         text.begin() + static_cast<std::ptrdiff_t>(end), ','),
              17);
    begin = end + 1;
  }
  EXPECT_TRUE(has(text, ",out of specification\n"));
}

TEST_F(CommandTest, ReplayWritesTimesAsAsked) {
  EXPECT_TRUE(has(replay(log_, {"--time", "rfc3339"}).out, "\n2023-11-14T22:13:20.25Z,"));
  EXPECT_TRUE(has(replay(log_, {"--time", "seconds"}).out, "\n1700000000.25,"));
}

TEST_F(CommandTest, ReplayTellsInWordsWhenWhatAndHowSure) {
  const Finished to_file = replay(log_, {"--words", "--out", folder_.path("o.csv")});
  EXPECT_EQ(to_file.code, 0) << to_file.err;
  EXPECT_EQ(to_file.err, "");
  EXPECT_TRUE(has(to_file.out, " %\nStretches")) << to_file.out;
  EXPECT_TRUE(has(to_file.out, "Stretches in which a channel was not sound:\n  sonic: from 1700000"))
      << to_file.out;
  const Finished to_stdout = replay(log_, {"--words"});
  EXPECT_EQ(to_stdout.err, to_file.out);
  EXPECT_EQ(to_stdout.out, read_file(folder_.path("o.csv")));
}

TEST_F(CommandTest, ALogWithoutFaultsIsSoundInWords) {
  const std::string log = folder_.write("sound.csv", log_of(basin_rows(100, 1000)));
  EXPECT_EQ(replay(log, {"--words", "--out", folder_.path("o.csv")}).out,
            "Every channel was sound throughout.\n");
}

TEST_F(CommandTest, GoodReadingsBesideWrongOnesAreUsedAndTheExitCodeIs2) {
  std::vector<std::string> rows = rows_;
  const std::vector<std::string> wrong{"1700000050,sonic,abc",   "1700000050,sonar,2", "1700000050,sonic,nan",
                                       "1700000050,sonic,inf",   "1700000050,sonic",   "yesterday,sonic,2",
                                       "1700000050,\"sonic\"x,2"};
  rows.insert(rows.begin() + 200, wrong.begin(), wrong.end());
  const Finished end = replay(folder_.write("mixed.csv", log_of(rows)), {"--out", folder_.path("o.csv")});
  EXPECT_EQ(end.code, 2);
  EXPECT_EQ(read_file(folder_.path("o.csv")), replay(log_).out);
  EXPECT_TRUE(has(end.err, "mixed.csv:202:18: sonic: is \"abc\"; must be a number\n")) << end.err;
  EXPECT_TRUE(has(end.err, "7 refusals in the log; everything else was used")) << end.err;
}

TEST_F(CommandTest, TheFirst10RefusalsAreShownAndAllCounted) {
  std::vector<std::string> rows = rows_;
  for (int i = 0; i < 25; ++i) rows.push_back("1700000199,sonic,x" + std::to_string(i));
  const Finished end = replay(folder_.write("wrong.csv", log_of(rows)));
  EXPECT_EQ(end.code, 2);
  EXPECT_EQ(lines(end.err), 11U) << end.err;
  EXPECT_TRUE(has(end.err, "25 refusals in the log, of which the first 10 are shown")) << end.err;
}

TEST_F(CommandTest, RowsBehindTheHorizonAreRefused) {
  std::vector<std::string> rows = rows_;
  rows.push_back("1700000100,sonic,2");
  const Finished end = replay(folder_.write("late.csv", log_of(rows)));
  EXPECT_EQ(end.code, 2);
  EXPECT_EQ(end.out, replay(log_).out);
  EXPECT_TRUE(has(end.err, "late.csv:602:1: sonic: lies ")) << end.err;
  EXPECT_TRUE(has(end.err, "must lie within the horizon, which is 30 s")) << end.err;
}

TEST_F(CommandTest, AHeaderThatCannotBeUsedEndsWith2AndNoOutput) {
  for (const char* text : {"", "\n", "time,sonar\n1,2\n", "a,b\n1,2\n", "time,channel\n", "\"time\n"}) {
    const Finished end = replay(folder_.write("wrong.csv", text), {"--out", folder_.path("o.csv")});
    EXPECT_EQ(end.code, 2) << text;
    EXPECT_TRUE(has(end.err, "wrong.csv:1:")) << end.err;
  }
  EXPECT_FALSE(has(read_file(folder_.path("o.csv")), "time"));
}

TEST_F(CommandTest, AnOutputThatCannotBeWrittenIs1) {
  EXPECT_EQ(replay(log_, {"--out", "/nowhere/o.csv"}).code, 1);
  if (::access("/dev/full", W_OK) != 0) return;
  // By redirection alone, so that the command never gets the device's name.
  const std::string script =
      std::string(STEELYARD_COMMAND) + " replay --rig " + rig_ + " --log " + log_ + " > /dev/full";
  const Finished full = run(folder_, {"/bin/bash", "-c", script});
  EXPECT_EQ(full.code, 1);
  EXPECT_TRUE(has(full.err, "No space left on device")) << full.err;
}

TEST_F(CommandTest, ReadingsOutsideTheRangeAreCounted) {
  std::vector<std::string> rows = rows_;
  rows.push_back("1700000200,sonic,7");
  const Finished end = replay(folder_.write("range.csv", log_of(rows)));
  EXPECT_EQ(end.code, 0);
  EXPECT_TRUE(has(end.err, "sonic: 1 readings outside its range were not fused")) << end.err;
}

// An interrupt leaves neither the file nor a part of it, even while the log is waited for.
TEST_F(CommandTest, AnInterruptLeavesNothingBehind) {
  const std::string fifo = folder_.path("fifo");
  ASSERT_EQ(::mkfifo(fifo.c_str(), 0600), 0);
  const int keep_open = ::open(fifo.c_str(), O_RDWR | O_CLOEXEC);
  ASSERT_GE(keep_open, 0);
  const std::string text = log_of(basin_rows(100, 1000));
  Process process(
      folder_, {STEELYARD_COMMAND, "replay", "--rig", rig_, "--log", fifo, "--out", folder_.path("o.csv")});
  ASSERT_EQ(::write(keep_open, text.data(), text.size()), static_cast<ssize_t>(text.size()));
  const auto has_part = [this] {
    const std::vector<std::string> names = folder_.names();
    return std::any_of(names.begin(), names.end(),
                       [](const std::string& name) { return name.starts_with("o.csv.part"); });
  };
  for (int i = 0; i < 1000 && !has_part(); ++i) std::this_thread::sleep_for(std::chrono::milliseconds(10));
  EXPECT_TRUE(has_part());
  std::this_thread::sleep_for(std::chrono::milliseconds(100));  // so that it has come to wait
  process.signal(SIGINT);
  const Finished end = process.wait();
  ::close(keep_open);
  EXPECT_EQ(end.code, 1);
  EXPECT_EQ(end.err, "steelyard: stopped\n");
  EXPECT_FALSE(has_part());
}

TEST_F(CommandTest, AReaderThatHasEnoughIsNoError) {
  const std::string script = std::string("set -o pipefail; ") + STEELYARD_COMMAND + " replay --rig " + rig_ +
                             " --log " + folder_.write("long.csv", log_of(basin_rows(5000, 9999))) +
                             " | head -n 2";
  const Finished end = run(folder_, {"/bin/bash", "-c", script});
  EXPECT_EQ(end.code, 0);
  EXPECT_EQ(lines(end.out), 2U);
  EXPECT_EQ(end.err, "");
}

}  // namespace
}  // namespace steelyard::client
