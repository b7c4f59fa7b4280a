// SPDX-License-Identifier: Apache-2.0
// Texts that are no description at all: nothing in them may throw, hang or abort, and each gets a clear
// message.
#include <gtest/gtest.h>

#include <random>
#include <string>
#include <string_view>

#include "descriptions.h"
#include "rig/document.h"

namespace steelyard::rig {
namespace {

struct Row {
  std::string_view text;
  std::string_view expected;
};
using std::string_view_literals::operator""sv;

constexpr std::string_view kMissing =
    "basin.yaml:1:1: response: is missing\n"
    "basin.yaml:1:1: states: is missing\n"
    "basin.yaml:1:1: channels: is missing\n";

constexpr Row kRows[] = {
    // nothing, or something else
    {"", "basin.yaml:1:1: is empty; a description has at least rig, response, states and channels\n"},
    {"# to do\n\n",
     "basin.yaml:1:1: is empty; a description has at least rig, response, states and channels\n"},
    {"- a\n- b\n", "basin.yaml:1:1: is not a map of keys and values, such as `rig: basin`\n"},
    {"[1, 2]", "basin.yaml:1:1: is not a map of keys and values, such as `rig: basin`\n"},
    {"\n  basin\n", "basin.yaml:2:3: is not a map of keys and values, such as `rig: basin`\n"},
    {"rig: basin\n", kMissing},
    // no text
    {"rig: ba\0sin\n"sv, "basin.yaml:1:8: byte 0x00 is a control character; a description is plain text\n"},
    {"rig: a\nlag: \x1b[31m1 s\n",
     "basin.yaml:2:6: byte 0x1b is a control character; a description is plain text\n"},
    {"rig: a # \xb5\n", "basin.yaml:1:10: byte 0xb5 is not valid UTF-8; save the file as UTF-8\n"},
    {"rig: \xc0\xaf\n", "basin.yaml:1:6: byte 0xc0 is not valid UTF-8; save the file as UTF-8\n"},
    {"rig: \xed\xa0\x80\n", "basin.yaml:1:6: byte 0xed is not valid UTF-8; save the file as UTF-8\n"},
    {"rig: \xf4\x90\x80\x80\n", "basin.yaml:1:6: byte 0xf4 is not valid UTF-8; save the file as UTF-8\n"},
    {"rig: \xe2\x82", "basin.yaml:1:6: byte 0xe2 is not valid UTF-8; save the file as UTF-8\n"},
    {"\xff\xfer\0i\0g\0"sv, "basin.yaml:1:1: byte 0xff is not valid UTF-8; save the file as UTF-8\n"},
    // YAML that a description does not use
    {"rig: a\n---\nrig: b\n", "basin.yaml:2:1: is the start of a second document; only one is allowed\n"},
    {"{rig: a}, {rig: b}", "basin.yaml:1:9: is the start of a second document; only one is allowed\n"},
    {"rig: &name basin\n", "basin.yaml:1:6: has an anchor (&); write the value out where it is needed\n"},
    {"rig: *name\n", "basin.yaml:1:6: is not valid YAML: the referenced anchor is not defined\n"},
    {"rig: !!str basin\n", "basin.yaml:1:6: has a tag (!); tags mean nothing here\n"},
    {"rig: !mine basin\n", "basin.yaml:1:6: has a tag (!); tags mean nothing here\n"},
    {"[a, b]: c\n", "basin.yaml:1:1: is a list or a map as a key; a key is a name\n"},
    // no YAML
    {"rig: a\nstates: {level: {unit: m\n", "basin.yaml:3:1: is not valid YAML: end of map flow not found\n"},
    {"rig: a\nlag: a: b\n", "basin.yaml:2:7: is not valid YAML: illegal map value\n"},
    {"rig: a\nlag\nstill: none\n", "basin.yaml:3:6: is not valid YAML: illegal map value\n"},
    {"rig: a\nstates:\n\tlevel: 1\n",
     "basin.yaml:3:7: is not valid YAML: illegal map value; the line is indented with a tab, use spaces\n"},
};

TEST(WholeText, EachGetsAClearMessage) {
  for (const Row& row : kRows) EXPECT_EQ(problems_of(row.text), row.expected) << row.text;
}

TEST(WholeText, DeepNestingIsRefusedBeforeItUsesUpTheStack) {
  EXPECT_EQ(problems_of("rig: " + std::string(20, '[') + std::string(20, ']')),
            "basin.yaml:1:21: is nested more than 16 deep\n");
  for (const std::string_view piece :
       {"[", "{", "{a: ", "[a, ", "- ", "? ", "[\n", "{a: 1, b: [", "&a ", "!", ": ", "'"}) {
    std::string text;
    while (text.size() + piece.size() <= kMaxTextBytes) text += piece;
    EXPECT_NE(problems_of(text), "") << piece;
    EXPECT_NE(problems_of("rig: " + text.substr(5)), "") << piece;
  }
}

TEST(WholeText, SizeIsBounded) {
  std::string text(kBasin);
  text += "#" + std::string(kMaxTextBytes - text.size() - 1, 'x');
  EXPECT_EQ(problems_of(text), "");
  EXPECT_EQ(problems_of(text + "x"),
            "basin.yaml:1:1: the text has 1048577 bytes; at most 1048576 are allowed\n");
}

TEST(WholeText, ListsOfProblemsAreBounded) {
  std::string text(kBasin);
  for (int i = 0; i < 60000; ++i) text += "key" + std::to_string(i) + ": 1\n";
  const Loaded out = load(text, "basin.yaml");
  ASSERT_EQ(out.problems.size(), 101U);
  EXPECT_EQ(out.problems[99].line, 119);  // kBasin has 19 lines
  EXPECT_EQ(out.problems[100].text(), "basin.yaml:120:1: more problems follow; the first 100 are listed");
}

TEST(WholeText, ColumnsCountCharacters) {
  EXPECT_EQ(problems_of(basin_with("{unit: m, start: 2", "{unit: \"µm²\", start: x")),
            "basin.yaml:5:32: states.level.start: is x; must be a finite number\n");
  EXPECT_EQ(problems_of("\xEF\xBB\xBF" + basin_with("rig: basin", "rig: Basin")),
            "basin.yaml:1:6: rig: is Basin; must be 1 to 63 small letters, digits and -\n");
  EXPECT_EQ(problems_of(basin_with("rig: basin\n", "rig: basin\r\nlag: 1\r\n")),
            "basin.yaml:2:6: lag: is 1; must be a duration with its unit (ms, s, min, h, d), such as 60 s\n");
}

TEST(WholeText, LongAndWildValuesAreShownShort) {
  EXPECT_EQ(problems_of(basin_with("rig: basin", "rig: " + std::string(1000, 'A'))),
            "basin.yaml:1:6: rig: is " + std::string(60, 'A') +
                "...; must be 1 to 63 small letters, digits and -\n");
  EXPECT_EQ(problems_of(basin_with("rig: basin", "rig: \"a\\e[31m\\n\"")),
            "basin.yaml:1:6: rig: is a?[31m?; must be 1 to 63 small letters, digits and -\n");
}

std::string many(std::string_view part, std::string_view entry, int count) {
  std::string text(part);
  for (int i = 0; i < count; ++i) text += "\n  n" + std::to_string(i) + ": " + std::string(entry);
  return text + "\n";
}

TEST(WholeText, SizesOfARigAreBounded) {
  EXPECT_EQ(problems_of("rig: a\nresponse: 1 s\nchannels: {y: {reads: n0, sd: 1, range: [0, 1]}}\n" +
                        many("states:", "{unit: m, start: 0, start_sd: 1}", 17)),
            "basin.yaml:21:3: states: has 17 entries; at most 16 are possible\n");
  EXPECT_EQ(problems_of(basin_with("inputs:", many("inputs:", "{unit: m, start: 0, range: [0, 1]}", 8))),
            "basin.yaml:17:3: inputs: has 9 entries; at most 8 are possible\n");
  EXPECT_EQ(problems_of(std::string(kBasin) + many("", "{reads: level, sd: 1, range: [0, 1]}", 31).substr(1)),
            "basin.yaml:50:3: channels: has 33 entries; at most 32 are possible\n");
  EXPECT_EQ(problems_of(basin_with("constants: {area: 120}", "constants:\n  area: 120" + many("", "1", 100))),
            "basin.yaml:104:3: constants: has 101 entries; at most 100 are possible\n");
}

// What follows from a part that is missing is not reported too.
TEST(WholeText, AMissingPartIsReportedOnce) {
  EXPECT_EQ(problems_of("rig: a\nresponse: 1 s\nstates: {}\nmotion: {level: inflow}\n"
                        "channels: {y: {reads: level, sd: 1, range: [0, 1]}}\n"),
            "basin.yaml:3:9: states: has no entries; must have at least one\n");
}

// Every cut, and single bytes changed at random: any answer, but an answer, and never one with neither or
// both.
TEST(WholeText, DamagedDescriptionsAreAnsweredToo) {
  for (std::size_t length = 0; length <= kBasin.size(); ++length) {
    const Loaded out = load(kBasin.substr(0, length), "cut");
    EXPECT_EQ(out.rig == nullptr, !out.problems.empty()) << length;
  }
  constexpr unsigned kSeed = 11;
  std::mt19937 random(kSeed);
  constexpr std::string_view kBytes = "{}[]:,-?&*!|>'\"%@`#\n\t 0.9az\x01\xc3";
  for (int i = 0; i < 3000; ++i) {
    std::string text(kBasin);
    text[random() % text.size()] = kBytes[random() % kBytes.size()];
    text[random() % text.size()] = kBytes[random() % kBytes.size()];
    const Loaded out = load(text, "damaged");
    EXPECT_EQ(out.rig == nullptr, !out.problems.empty()) << "seed " << kSeed << ":\n" << text;
  }
}

}  // namespace
}  // namespace steelyard::rig
