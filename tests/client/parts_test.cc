// SPDX-License-Identifier: Apache-2.0
// The smaller parts of the command: paces, sources, batches, rows, the screen.
#include <gtest/gtest.h>

#include <algorithm>
#include <chrono>
#include <string>
#include <vector>

#include "cli/batches.h"
#include "cli/bridge.h"
#include "cli/columns.h"
#include "cli/pace.h"
#include "cli/screen.h"
#include "client/process.h"

namespace steelyard::client {
namespace {

TEST(ParsePace, KnowsThreeForms) {
  EXPECT_EQ(parse_pace("fast"), 0.0);
  EXPECT_EQ(parse_pace("real"), 1.0);
  EXPECT_EQ(parse_pace("x60"), 60.0);
  EXPECT_EQ(parse_pace("x0.5"), 0.5);
  for (const char* wrong : {"", "x", "x0", "x-1", "xinf", "xnan", "60", "slow", "x6 0"}) {
    EXPECT_EQ(parse_pace(wrong), std::nullopt) << wrong;
  }
}

TEST(Pace, CountsFromTheFirstTime) {
  Pace pace(10.0);
  const SteadyTime now{};
  EXPECT_DOUBLE_EQ(pace.left_s(1'000'000'000, now), 0.0);
  EXPECT_DOUBLE_EQ(pace.left_s(6'000'000'000, now), 0.5);
  EXPECT_DOUBLE_EQ(pace.left_s(6'000'000'000, now + std::chrono::milliseconds(500)), 0.0);
  EXPECT_DOUBLE_EQ(Pace(0.0).left_s(6'000'000'000, now), 0.0);
}

TEST(DefaultSource, TellsLogsOfOneNameApart) {
  const Folder one;
  const Folder other;
  const std::string first = default_source(one.write("log.csv", "time,channel,value\n1,sonic,2\n"));
  EXPECT_TRUE(first.starts_with("log.csv-"));
  EXPECT_EQ(default_source(other.write("log.csv", "time,channel,value\n1,sonic,2\n")), first);
  EXPECT_NE(default_source(other.write("log.csv", "time,channel,value\n1,sonic,3\n")), first);
  // Only the first 4 KiB count: a log that grows stays the same source.
  const std::string long_log(5000, 'x');
  EXPECT_EQ(default_source(one.write("a", long_log)), default_source(one.write("a", long_log + "more")));
  EXPECT_LE(default_source(one.write(std::string(250, 'n'), "")).size(), kMostSourceBytes);
}

timeline::Reading reading(engine::TimeNs time_ns, std::uint64_t sequence) {
  return {time_ns, {false, 1}, 2.5, engine::Quality::kGood, 0, sequence};
}

TEST(BatchMaker, WritesColumns) {
  BatchMaker maker(3);
  maker.add({1000, {true, 2}, 1.5, engine::Quality::kGood, 0, 7});
  maker.add({1000, {false, 0}, 2.5, engine::Quality::kBad, 0, 8});
  maker.add({1500, {false, 1}, 3.5, engine::Quality::kUncertain, 0, 9});
  const v1::Batch batch = maker.take();
  EXPECT_EQ(
      batch.ShortDebugString(),
      "first_sequence: 7 base_time_ns: 1000 time_step_ns: 0 time_step_ns: 0 time_step_ns: 500 channel: 2 "
      "channel: 3 channel: 4 value: 1.5 value: 2.5 value: 3.5 quality_row: 1 quality_row: 2 quality: BAD "
      "quality: UNCERTAIN");
  EXPECT_EQ(maker.rows(), 0U);
}

TEST(BatchMaker, PutsFurtherPartsInAColumnOfTheirOwn) {
  BatchMaker maker(0);
  timeline::Values fix(1.5);
  fix.add(2.5);
  fix.add(3.5);
  maker.add({1000, {false, 1}, fix, engine::Quality::kGood, 0, 1});
  maker.add({1000, {false, 0}, 9.0, engine::Quality::kGood, 0, 2});
  maker.add({1000, {false, 1}, fix, engine::Quality::kGood, 0, 3});
  EXPECT_EQ(maker.values(), 7U);
  const v1::Batch batch = maker.take();
  EXPECT_EQ(std::vector<double>(batch.value().begin(), batch.value().end()),
            (std::vector<double>{1.5, 9.0, 1.5}));
  EXPECT_EQ(std::vector<double>(batch.more_values().begin(), batch.more_values().end()),
            (std::vector<double>{2.5, 3.5, 2.5, 3.5}));
}

// gRPC takes no message above 4 MiB.
TEST(BatchMaker, IsFullWithManyParts) {
  BatchMaker maker(0);
  timeline::Reading next = reading(5, 0);
  next.values = timeline::Values(std::vector<double>(timeline::Values::kMost, 1.0));
  while (!maker.full_before(next, false)) {
    ++next.sequence;
    maker.add(next);
  }
  EXPECT_GT(maker.rows(), BatchMaker::kUsualRows);
  EXPECT_LE(maker.take().ByteSizeLong(), 4U << 20U);
}

TEST(BatchMaker, KeepsTheReadingsOfOneTimeTogether) {
  BatchMaker maker(0);
  std::uint64_t sequence = 0;
  EXPECT_FALSE(maker.full_before(reading(5, 1), true));
  for (std::size_t i = 0; i < BatchMaker::kUsualRows + 10; ++i) {
    const timeline::Reading next = reading(5, ++sequence);
    EXPECT_FALSE(maker.full_before(next, true));
    maker.add(next);
  }
  EXPECT_TRUE(maker.full_before(reading(6, sequence + 1), false));
  while (maker.rows() < BatchMaker::kMostRows) maker.add(reading(5, ++sequence));
  EXPECT_TRUE(maker.full_before(reading(5, sequence + 1), false));
}

TEST(BatchMaker, MakesABatchOfEachTimeWhenPaced) {
  BatchMaker maker(0);
  maker.add(reading(5, 1));
  EXPECT_FALSE(maker.full_before(reading(6, 2), false));
  EXPECT_TRUE(maker.full_before(reading(6, 2), true));
}

Picture picture() {
  v1::Moment moment;
  moment.set_time_ns(1'500'000'000);
  moment.set_started(true);
  moment.set_quality(v1::ESTIMATE_GOOD);
  v1::StateEstimate* const state = moment.add_states();
  state->set_name("level");
  state->set_unit("m");
  state->set_mean(2.0341);
  state->set_sd(0.004);
  for (const char* name : {"sonic", "radar"}) {
    v1::ChannelEstimate* const channel = moment.add_channels();
    channel->set_name(name);
    channel->set_unit("m");
    channel->set_trust(0.75);
    for (const double p : {0.1, 0.0, 0.9, 0.0, 0.0, 0.0}) channel->add_probability(p);
    channel->set_age_s(1.5);
    channel->set_words(std::string(name) + " reads +0.182 ± 0.006 m off, 90 %");
  }
  moment.mutable_channels(1)->set_age_s(-1.0);
  return picture_of(moment);
}

TEST(Columns, RowsAreThoseOfTheDesign) {
  const Picture one = picture();
  std::string text;
  append_estimate_header(text, one.names);
  append_estimate_row(text, one.estimate, TimeStyle::kSeconds);
  EXPECT_EQ(text, "time,level,level.sd,trust.sonic,trust.radar\n1.5,2.0341,0.004,0.75,0.75\n");
  text.clear();
  append_channel_header(text);
  append_channel_rows(text, one.names, one.estimate, TimeStyle::kRfc3339);
  EXPECT_EQ(text,
            "time,channel,trust,p.sound,p.creeping,p.offset,p.wandering,p.stuck,p.frozen,p.silent,noise_sd,"
            "noise_sd.lo,"
            "noise_sd.hi,offset,offset.sd,influence,age,status\n"
            "1970-01-01T00:00:01.5Z,sonic,0.75,0.1,0,0.9,0,0,0,0,0,0,0,0,0,0,1.5,out of specification\n"
            "1970-01-01T00:00:01.5Z,radar,0.75,0.1,0,0.9,0,0,0,0,0,0,0,0,0,0,,out of specification\n");
}

TEST(PictureOf, AnEmptyMessageIsNoTrouble) {
  v1::Moment moment;
  moment.add_channels()->set_name("sonic");
  const Picture one = picture_of(moment);
  EXPECT_FALSE(one.started);
  EXPECT_EQ(one.names.channels.size(), 1U);
  EXPECT_EQ(one.quality, "unknown");
}

TEST(Screen, ShowsBarsAndWordsAndFits) {
  Screen screen(false);
  const std::vector<std::string> lines = screen.draw(picture(), {120, 24});
  ASSERT_EQ(lines.size(), 8U);
  EXPECT_EQ(lines[0], "1970-01-01T00:00:01.5Z   estimate good");
  EXPECT_TRUE(lines[2].starts_with("level  2.034 ± 0.004 m")) << lines[2];
  EXPECT_NE(lines[2].find("[==============="), std::string::npos) << lines[2];
  EXPECT_EQ(lines[4],
            "sonic  trust 0.75 [###############.....]  1.5 s   sonic reads +0.182 ± 0.006 m off, 90 %");
  EXPECT_EQ(lines[5],
            "radar  trust 0.75 [###############.....]  never   radar reads +0.182 ± 0.006 m off, 90 %");
  EXPECT_EQ(lines[7], "Advice only: trips and interlocks must not depend on it.");
  for (const std::string& line : Screen(false).draw(picture(), {20, 24})) {
    EXPECT_LE(std::count_if(line.begin(), line.end(), [](char c) { return (c & 0xC0) != 0x80; }), 20) << line;
  }
  EXPECT_EQ(Screen(false).draw(picture(), {120, 3}).size(), 3U);
}

TEST(Screen, ColourOnlyRepeatsWhatTheWordsSay) {
  std::vector<std::string> plain = Screen(false).draw(picture(), {120, 24});
  std::vector<std::string> coloured = Screen(true).draw(picture(), {120, 24});
  ASSERT_EQ(plain.size(), coloured.size());
  EXPECT_NE(plain, coloured);
  for (std::string& line : coloured) {
    for (std::size_t at = line.find('\x1b'); at != std::string::npos; at = line.find('\x1b')) {
      line.erase(at, line.find('m', at) - at + 1);
    }
  }
  EXPECT_EQ(plain, coloured);
}

}  // namespace
}  // namespace steelyard::client
