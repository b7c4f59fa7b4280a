// SPDX-License-Identifier: Apache-2.0
// Logs, right and wrong: what is read, what is refused and with which words. The rig of these tests has the
// channels sonic, radar and fix (of three parts) and the input pump.
#include "lib/log/log_csv.h"

#include <gtest/gtest.h>

#include <sstream>
#include <string>
#include <vector>

#include "lib/log/text.h"

namespace steelyard::client {
namespace {

std::optional<Named> find_signal(std::string_view name) {
  if (name == "sonic") return Named{{false, 0}, 1};
  if (name == "radar") return Named{{false, 1}, 1};
  if (name == "fix") return Named{{false, 2}, 3};
  if (name == "pump") return Named{{true, 0}, 1};
  return std::nullopt;
}

struct Read {
  bool opened = false;
  std::vector<std::string> readings;  // "1.5 sonic 2.25 good"
  std::vector<std::string> problems;
  std::vector<std::uint64_t> numbers;  // of the rows
};

std::string describe(const LogReading& reading) {
  static const char* const kQualities[] = {"good", "uncertain", "bad", "out_of_service", "simulated"};
  std::string text = time_text(reading.time_ns, TimeStyle::kSeconds);
  static const char* const kChannels[] = {" sonic", " radar", " fix"};
  text += reading.signal.is_input ? " pump" : kChannels[reading.signal.index];
  for (const double value : reading.values.all()) {
    text += ' ';
    append_number(text, value);
  }
  return text + " " + kQualities[static_cast<int>(reading.quality)];
}

Read read(const std::string& text) {
  std::istringstream stream(text);
  Read result;
  LogReader log(stream, "log.csv", find_signal,
                [&result](const rig::Problem& one) { result.problems.push_back(one.text()); });
  result.opened = log.open();
  LogRow row;
  while (result.opened && log.next(row)) {
    result.numbers.push_back(row.number);
    for (const LogReading& reading : row.readings) result.readings.push_back(describe(reading));
  }
  return result;
}

using Lines = std::vector<std::string>;

struct Case {
  const char* what;
  std::string log;
  Lines readings;
  Lines problems;
  bool opened = true;
};

const std::string kLong = "time,channel,value\n";

const std::vector<Case> kCases = {
    // right
    {"long", kLong + "1,sonic,2.5\n2,pump,0.06\n", {"1 sonic 2.5 good", "2 pump 0.06 good"}, {}},
    {"long, columns in another order", "value,time,channel\n2.5,1,sonic\n", {"1 sonic 2.5 good"}, {}},
    {"long, quality",
     "time,channel,value,quality\n1,sonic,2,\n2,sonic,2,good\n3,sonic,2,uncertain\n4,sonic,2,bad\n"
     "5,sonic,2,out_of_service\n6,sonic,2,simulated\n",
     {"1 sonic 2 good", "2 sonic 2 good", "3 sonic 2 uncertain", "4 sonic 2 bad", "5 sonic 2 out_of_service",
      "6 sonic 2 simulated"},
     {}},
    {"long, a bad reading needs no value", "time,channel,value,quality\n1,pump,,bad\n", {"1 pump 0 bad"}, {}},
    {"wide",
     "time,sonic,radar,pump\n1,2,3,0.5\n2,,4,\n3,,,\n",
     {"1 sonic 2 good", "1 radar 3 good", "1 pump 0.5 good", "2 radar 4 good"},
     {}},
    {"wide, quality",
     "time,sonic,sonic.quality,radar\n1,2,bad,3\n2,2,,3\n3,,bad,3\n",
     {"1 sonic 2 bad", "1 radar 3 good", "2 sonic 2 good", "2 radar 3 good", "3 radar 3 good"},
     {}},
    {"wide, quality before its column",
     "time,sonic.quality,sonic\n1,uncertain,2\n",
     {"1 sonic 2 uncertain"},
     {}},
    {"CRLF", "time,channel,value\r\n1,sonic,2\r\n2,sonic,3\r\n", {"1 sonic 2 good", "2 sonic 3 good"}, {}},
    {"byte-order mark", "\xEF\xBB\xBFtime,channel,value\n1,sonic,2\n", {"1 sonic 2 good"}, {}},
    {"quoted cells", "\"time\",\"channel\",\"value\"\n\"1\",\"sonic\",\"2\"\n", {"1 sonic 2 good"}, {}},
    {"no line end at the end", kLong + "1,sonic,2", {"1 sonic 2 good"}, {}},
    {"empty lines", kLong + "1,sonic,2\n\n2,sonic,3\n\n\n", {"1 sonic 2 good", "2 sonic 3 good"}, {}},
    {"header alone", kLong, {}, {}},
    {"time backwards", kLong + "5,sonic,2\n3,sonic,3\n", {"5 sonic 2 good", "3 sonic 3 good"}, {}},
    {"RFC 3339", kLong + "1970-01-01T01:00:01.5+01:00,sonic,2\n", {"1.5 sonic 2 good"}, {}},

    // right: vector channels
    {"long, parts in columns of any order",
     "value3,time,value,channel,value2\n30,1,10,fix,20\n,2,5,sonic,\n",
     {"1 fix 10 20 30 good", "2 sonic 5 good"},
     {}},
    {"long, a bad vector reading needs no values",
     "time,channel,value,value2,value3,quality\n1,fix,,,,bad\n2,fix,1,2,3,bad\n",
     {"1 fix 0 0 0 bad", "2 fix 1 2 3 bad"},
     {}},
    {"long, a bad vector reading needs no columns either",
     "time,channel,value,quality\n1,fix,,bad\n",
     {"1 fix 0 0 0 bad"},
     {}},
    {"wide, parts",
     "time,fix.2,sonic,fix.quality,fix.1,fix.3\n1,20,5,,10,30\n2,,6,,,\n3,2,,uncertain,1,3\n",
     {"1 fix 10 20 30 good", "1 sonic 5 good", "2 sonic 6 good", "3 fix 1 2 3 uncertain"},
     {}},

    // fatal: the header
    {"empty file",
     "",
     {},
     {"log.csv:1:1: is empty; must begin with a header such as time,channel,value"},
     false},
    {"nothing but empty lines",
     "\n\n",
     {},
     {"log.csv:1:1: is empty; must begin with a header such as time,channel,value"},
     false},
    {"no time",
     "sonic,radar\n1,2\n",
     {},
     {"log.csv:1:1: header: has no column \"time\"; must have one"},
     false},
    {"no header", "1,sonic,2\n", {}, {"log.csv:1:1: header: has no column \"time\"; must have one"}, false},
    {"long without value",
     "time,channel\n1,sonic\n",
     {},
     {"log.csv:1:1: header: has no column \"value\"; a long log must have time, channel and value"},
     false},
    {"long without channel",
     "time,value\n1,2\n",
     {},
     {"log.csv:1:1: header: has no column \"channel\"; a long log must have time, channel and value"},
     false},
    {"long, a value column is missing between others",
     "time,channel,value3,value\n",
     {},
     {"log.csv:1:14: header: has the column \"value3\" but no column \"value2\""},
     false},
    {"wide, a part is missing",
     "time,sonic,fix.3,fix.1\n1,2,3,4\n",
     {},
     {"log.csv:1:12: header: has no column \"fix.2\"; a log of fix must have all its 3 parts"},
     false},
    {"wide, a part too many",
     "time,fix.1,fix.2,fix.3,fix.4\n",
     {},
     {"log.csv:1:24: header: has the column \"fix.4\"; the channel has 3 parts"},
     false},
    {"wide, a vector channel as one column",
     "time,fix\n",
     {},
     {"log.csv:1:6: header: has the column \"fix\"; the channel has 3 parts, \"fix.1\" …"},
     false},
    {"wide, names that are no parts",
     "time,fix.0,fix.01,fix.x,fix.,sonic.1,.1\n",
     {},
     {"log.csv:1:6: header: has the column \"fix.0\"; the rig has no such channel or input",
      "log.csv:1:12: header: has the column \"fix.01\"; the rig has no such channel or input",
      "log.csv:1:19: header: has the column \"fix.x\"; the rig has no such channel or input",
      "log.csv:1:25: header: has the column \"fix.\"; the rig has no such channel or input",
      "log.csv:1:30: header: has the column \"sonic.1\"; the rig has no such channel or input",
      "log.csv:1:38: header: has the column \".1\"; the rig has no such channel or input"},
     false},
    {"long, unknown column",
     "time,channel,value,note\n",
     {},
     {"log.csv:1:20: header: has the column \"note\"; a long log has time, channel, value, value2 … and "
      "quality"},
     false},
    {"long, column twice",
     "time,channel,value,value\n",
     {},
     {"log.csv:1:20: header: has the column \"value\" twice"},
     false},
    {"wide, unknown channels",
     "time,sonic,sonar,lidar\n1,2,3,4\n",
     {},
     {"log.csv:1:12: header: has the column \"sonar\"; the rig has no such channel or input",
      "log.csv:1:18: header: has the column \"lidar\"; the rig has no such channel or input"},
     false},
    {"wide, column twice",
     "time,sonic,sonic\n1,2,3\n",
     {},
     {"log.csv:1:12: header: has the column \"sonic\" twice"},
     false},
    {"wide, quality without its column",
     "time,sonic,radar.quality\n",
     {},
     {"log.csv:1:12: header: has the column \"radar.quality\" but no column \"radar\""},
     false},
    {"time alone",
     "time\n1\n",
     {},
     {"log.csv:1:1: header: names no channel; must have a column for at least one"},
     false},
    {"wrong quoting in the header",
     "time,\"sonic\n1,2\n",
     {},
     {"log.csv:1:6: header: opens a quoted cell that is not closed as RFC 4180 says"},
     false},
    {"UTF-16",
     std::string("\xFF\xFEt\0i\0m\0e\0\n\0", 12),
     {},
     {"log.csv:1:1: header: is UTF-16; must be UTF-8"},
     false},

    // refused alone: good readings beside it are used
    {"text for a number",
     kLong + "1,sonic,abc\n2,sonic,3\n",
     {"2 sonic 3 good"},
     {"log.csv:2:9: sonic: is \"abc\"; must be a number"}},
    {"wide, text for a number",
     "time,sonic,radar\n1,abc,3\n",
     {"1 radar 3 good"},
     {"log.csv:2:3: sonic: is \"abc\"; must be a number"}},
    {"column counts characters",
     "time,sonic,radar\n1,äöü,x\n",
     {},
     {"log.csv:2:3: sonic: is \"äöü\"; must be a number", "log.csv:2:7: radar: is \"x\"; must be a number"}},
    {"decimal comma", kLong + "1,sonic,\"2,5\"\n", {}, {"log.csv:2:9: sonic: is \"2,5\"; must be a number"}},
    {"value with a space", kLong + "1,sonic, 2\n", {}, {"log.csv:2:9: sonic: is \" 2\"; must be a number"}},
    {"empty value", kLong + "1,sonic,\n", {}, {"log.csv:2:9: sonic: is empty; must be a number"}},
    {"not a number",
     kLong + "1,sonic,NaN\n2,sonic,3\n",
     {"2 sonic 3 good"},
     {"log.csv:2:9: sonic: is \"NaN\"; must be finite"}},
    {"infinity",
     kLong + "1,sonic,-inf\n1,sonic,infinity\n1,sonic,1e999\n1,radar,3\n",
     {"1 radar 3 good"},
     {"log.csv:2:9: sonic: is \"-inf\"; must be finite",
      "log.csv:3:9: sonic: is \"infinity\"; must be finite",
      "log.csv:4:9: sonic: is \"1e999\"; must be finite"}},
    {"unknown channel",
     kLong + "1,sonar,2\n2,sonic,3\n",
     {"2 sonic 3 good"},
     {"log.csv:2:3: channel: is \"sonar\"; the rig has no such channel or input"}},
    {"empty channel",
     kLong + "1,,2\n",
     {},
     {"log.csv:2:3: channel: is \"\"; the rig has no such channel or input"}},
    {"wrong time",
     kLong + "yesterday,sonic,2\n2,sonic,3\n",
     {"2 sonic 3 good"},
     {"log.csv:2:1: time: is \"yesterday\"; must be RFC 3339 with an offset, or decimal seconds since 1970, "
      "between "
      "the years 1824 and 2115"}},
    {"time too far away",
     kLong + "1700-01-01T00:00:00Z,sonic,2\n2,sonic,3\n",
     {"2 sonic 3 good"},
     {"log.csv:2:1: time: is \"1700-01-01T00:00:00Z\"; must be RFC 3339 with an offset, or decimal seconds "
      "since "
      "1970, between the years 1824 and 2115"}},
    {"wrong quality",
     "time,channel,value,quality\n1,sonic,2,fine\n2,sonic,3,good\n",
     {"2 sonic 3 good"},
     {"log.csv:2:11: sonic.quality: is \"fine\"; must be good, uncertain, bad, out_of_service or simulated"}},
    {"wide, wrong quality",
     "time,sonic,sonic.quality,radar\n1,2,fine,3\n",
     {"1 radar 3 good"},
     {"log.csv:2:5: sonic.quality: is \"fine\"; must be good, uncertain, bad, out_of_service or simulated"}},
    {"too few cells",
     kLong + "1,sonic\n2,sonic,3\n",
     {"2 sonic 3 good"},
     {"log.csv:2:1: row: has 2 cells; must have 3 like the header"}},
    {"too many cells",
     kLong + "1,sonic,2,3\n2,sonic,3\n",
     {"2 sonic 3 good"},
     {"log.csv:2:1: row: has 4 cells; must have 3 like the header"}},

    // vector readings with a part that is wrong or missing
    {"long, a part is missing",
     "time,channel,value,value2,value3\n1,fix,10,,30\n2,fix,1,2,3\n",
     {"2 fix 1 2 3 good"},
     {"log.csv:2:10: fix.2: is empty; must be a number"}},
    {"long, a part is wrong",
     "time,channel,value,value2,value3\n1,fix,10,nan,30\n2,fix,1,2,x\n3,sonic,4,,\n",
     {"3 sonic 4 good"},
     {"log.csv:2:10: fix.2: is \"nan\"; must be finite", "log.csv:3:11: fix.3: is \"x\"; must be a number"}},
    {"long, a bad reading with some parts",
     "time,channel,value,value2,value3,quality\n1,fix,10,,30,bad\n",
     {},
     {"log.csv:2:10: fix.2: is empty; must be a number"}},
    {"long, columns are missing",
     "time,channel,value,value2\n1,fix,10,20\n2,sonic,3,\n",
     {"2 sonic 3 good"},
     {"log.csv:2:3: fix: has 3 parts; the log has no column \"value3\""}},
    {"long, a value too many",
     "time,channel,value,value2,value3,value4\n1,sonic,10,20,,\n2,fix,1,2,3,4\n3,fix,1,2,3,\n",
     {"3 fix 1 2 3 good"},
     {"log.csv:2:12: sonic: value2 is \"20\"; must be empty for a channel of 1 part",
      "log.csv:3:13: fix: value4 is \"4\"; must be empty for a channel of 3 parts"}},
    {"wide, a part is missing or wrong",
     "time,fix.1,fix.2,fix.3,sonic\n1,10,,30,4\n2,a,2,3,5\n3,1,2,3,6\n",
     {"1 sonic 4 good", "2 sonic 5 good", "3 fix 1 2 3 good", "3 sonic 6 good"},
     {"log.csv:2:6: fix.2: is empty; must be a number", "log.csv:3:3: fix.1: is \"a\"; must be a number"}},

    // wrong quoting
    {"text behind a closing quote",
     kLong + "1,\"sonic\"x,2\n2,sonic,3\n",
     {"2 sonic 3 good"},
     {"log.csv:2:10: row: has text after the closing quote of a cell"}},
    {"quote inside a cell",
     kLong + "1,so\"nic,2\n2,sonic,3\n",
     {"2 sonic 3 good"},
     {"log.csv:2:5: row: has a quote inside a cell that does not begin with one"}},
    {"quote never closed: the other rows are used",
     kLong + "1,\"sonic,2\n2,sonic,3\n3,sonic,4\n",
     {"2 sonic 3 good", "3 sonic 4 good"},
     {"log.csv:2:3: row: opens a quoted cell that is not closed as RFC 4180 says"}},
    {"quote closed by another row's",
     kLong + "1,\"sonic,2\n2,\"sonic\",3\n3,sonic,4\n",
     {"2 sonic 3 good", "3 sonic 4 good"},
     {"log.csv:2:3: row: opens a quoted cell that is not closed as RFC 4180 says"}},
    {"quote at the very end",
     kLong + "1,sonic,\"",
     {},
     {"log.csv:2:9: row: opens a quoted cell that is not closed as RFC 4180 says"}},
    {"doubled quotes and a line break in a cell",
     kLong + "1,\"a \"\"b\"\"\nc\",2\n2,sonic,x\n",
     {},
     {"log.csv:2:3: channel: is \"a \"b\"?c\"; the rig has no such channel or input",
      "log.csv:4:9: sonic: is \"x\"; must be a number"}},
    {"a zero byte",
     kLong + std::string("1,sonic,2\0\n", 11) + "2,sonic,3\n",
     {"2 sonic 3 good"},
     {"log.csv:2:9: sonic: is \"2?\"; must be a number"}},
};

TEST(LogReader, ReadsRightLogsAndSaysWhatIsWrongWithOthers) {
  for (const Case& one : kCases) {
    SCOPED_TRACE(one.what);
    const Read result = read(one.log);
    EXPECT_EQ(result.opened, one.opened);
    EXPECT_EQ(result.readings, one.readings);
    EXPECT_EQ(result.problems, one.problems);
  }
}

TEST(LogReader, NumbersRowsAndCountsWrongOnes) {
  const Read result = read(kLong + "1,sonic,2\n\n2,sonic,x\n3,sonic\n4,sonic,5\n");
  EXPECT_EQ(result.numbers, (std::vector<std::uint64_t>{1, 2, 3, 4}));
}

TEST(LogReader, RefusesALineOf10MbAndGoesOn) {
  for (const char* begin : {"1,sonic,", "1,\"sonic", "", "\""}) {
    const Read result = read(kLong + begin + std::string(10'000'000, '7') + "\n2,sonic,3\n");
    ASSERT_EQ(result.problems.size(), 1U);
    EXPECT_EQ(result.problems.front(), "log.csv:2:1: row: is longer than 1 MiB; a row must be shorter");
    EXPECT_EQ(result.readings, Lines{"2 sonic 3 good"});
  }
}

TEST(LogReader, RefusesALongLineInsideAQuoteAndGoesOn) {
  const Read result = read(kLong + "1,\"sonic\n" + std::string(10'000'000, '7') + "\n2,sonic,3\n");
  EXPECT_EQ(result.problems,
            (Lines{"log.csv:2:3: row: opens a quoted cell that is not closed as RFC 4180 says",
                   "log.csv:3:1: row: is longer than 1 MiB; a row must be shorter"}));
  EXPECT_EQ(result.readings, Lines{"2 sonic 3 good"});
}

TEST(LogReader, ANeverClosedQuoteInALongFileCostsOneRow) {
  std::string log = kLong + "1,\"sonic,2\n";
  constexpr std::size_t kRows = 300'000;  // more than 1 MiB behind the quote
  for (std::size_t i = 0; i < kRows; ++i) log += "2,sonic,3\n";
  const Read result = read(log);
  EXPECT_EQ(result.problems.size(), 1U);
  EXPECT_EQ(result.readings.size(), kRows);
}

TEST(CsvReader, ANeverClosedQuoteIsGivenUpBeforeTheFileEnds) {
  std::istringstream stream("\"a\n" + std::string(8'000'000, '\n'));
  CsvReader csv(stream);
  EXPECT_EQ(csv.next(), CsvReader::Got::kWrong);
  EXPECT_GT(csv.bytes_read(), kMaxRecordBytes);
}

TEST(LogReader, AcceptsALineOfJustUnder1MiB) {
  const std::string value = "2." + std::string((1U << 20U) - 10, '0');
  const Read result = read(kLong + "1,sonic," + value + "\n");
  EXPECT_EQ(result.problems, Lines{});
  EXPECT_EQ(result.readings, Lines{"1 sonic 2 good"});
}

// Whatever the bytes are, reading ends, and every reading comes with a finite value.
TEST(LogReader, SurvivesAnyBytes) {
  const std::string alphabet = "0123456789.,,,\"\"\n\n\r-eE sonicradr\xEF\xBB\xBF\xC3\xA4";
  for (unsigned seed = 1; seed <= 2000; ++seed) {
    SCOPED_TRACE("seed " + std::to_string(seed));
    static const std::string kHeaders[] = {kLong, "time,sonic,radar\n", "time,channel,value,value2,value3\n",
                                           "time,fix.1,fix.2,fix.3\n"};
    std::string text = kHeaders[seed % 4];
    unsigned state = seed * 2654435761U;
    for (int i = 0; i < 300; ++i) {
      state = state * 1664525U + 1013904223U;
      text += alphabet[(state >> 16U) % alphabet.size()];
    }
    const Read result = read(text);
    EXPECT_TRUE(result.opened);
  }
}

}  // namespace
}  // namespace steelyard::client
