// SPDX-License-Identifier: Apache-2.0
// Wrong descriptions and what is said of them, word for word. Each row is kBasin (descriptions.h) with one
// piece turned into another; "basin.yaml:" stands before every line of what is expected.
#include <gtest/gtest.h>

#include <string>
#include <string_view>

#include "descriptions.h"

namespace steelyard::rig {
namespace {

struct Row {
  std::string_view from;
  std::string_view to;
  std::string_view expected;
};

// clang-format off
constexpr Row kRows[] = {
    // the head
    {"rig: basin", "rig: Basin",
     "1:6: rig: is Basin; must be 1 to 63 small letters, digits and -\n"},
    {"rig: basin", "rig:",
     "1:1: rig: is empty; must be 1 to 63 small letters, digits and -\n"},
    {"rig: basin", "rig: [basin]",
     "1:6: rig: is a list; must be 1 to 63 small letters, digits and -\n"},
    {"rig: basin\n", "",
     "1:1: rig: is missing\n"},
    {"response: 60 s", "response: 60",
     "2:11: response: is 60; must be a duration with its unit (ms, s, min, h, d), such as 60 s\n"},
    {"response: 60 s", "response: -60 s",
     "2:11: response: is -60 s; must be longer than 0\n"},
    {"response: 60 s", "response: 0 s",
     "2:11: response: is 0 s; must be longer than 0\n"},
    {"response: 60 s", "response: 60 sec",
     "2:11: response: is 60 sec; must be a duration with its unit (ms, s, min, h, d), such as 60 s\n"},
    {"response: 60 s", "response: 40000 d",
     "2:11: response: is 40000 d; must be at most 36525 d (100 years)\n"},
    {"response: 60 s", "response: 60 s\nhorizon: soon",
     "3:10: horizon: is soon; must be a duration with its unit (ms, s, min, h, d), such as 60 s\n"},
    {"response: 60 s", "response: 60 s\nlag: {s: 1}",
     "3:6: lag: is a map; must be a duration with its unit (ms, s, min, h, d), such as 60 s\n"},
    {"response: 60 s", "responce: 60 s",
     "1:1: response: is missing\n"
     "2:1: responce: is not a known key; did you mean response?\n"},
    {"response: 60 s", "response: 60 s\nversion: 2",
     "3:1: version: is not a known key; known are rig, response, horizon, lag, constants, states, "
     "inputs, motion, unrest, jolts, still, common, freeze_share, channels\n"},
    {"response: 60 s", "response: 60 s\nresponse: 61 s",
     "3:1: response: is given twice; first in line 2\n"},
    // constants and states
    {"{area: 120}", "{area: wide}",
     "3:19: constants.area: is wide; must be a finite number\n"},
    {"{area: 120}", "{area: .inf}",
     "3:19: constants.area: is .inf; must be a finite number\n"},
    {"{area: 120}", "{area: 1e999}",
     "3:19: constants.area: is 1e999; must be a finite number\n"},
    {"{area: 120}", "{area: 0x10}",
     "3:19: constants.area: is 0x10; must be a finite number\n"},
    {"{area: 120}", "[120]",
     "3:12: constants: is a list; must be a map by name\n"},
    {"{area: 120}", "{area: 120, sqrt: 2}",
     "3:24: constants.sqrt: has a name that formulas use themselves; choose another\n"},
    {"{area: 120}", "{area: 120, t: 2}",
     "3:24: constants.t: has a name that formulas use themselves; choose another\n"},
    {"{area: 120}", "{area: 120, time: 2}",
     "3:24: constants.time: has the name of the time column in logs; choose another\n"},
    {"{area: 120}", "{area: 120, Big: 2}",
     "3:24: constants.Big: is not a name; a name is a small letter, then small letters, digits and _, "
     "at most 63 characters\n"},
    {"{area: 120}", "{area: 120, level: 2}",
     "5:3: states.level: has the name of a constant (line 3); each name stands for one thing\n"},
    {"start: 2, start_sd: 2", "start_sd: 2",
     "5:3: states.level.start: is missing\n"},
    {"start: 2, start_sd: 2", "start: .nan, start_sd: 2",
     "5:28: states.level.start: is .nan; must be a finite number\n"},
    {"start: 2, start_sd: 2", "start: 2, start_sd: 0",
     "5:41: states.level.start_sd: is 0; must be greater than 0\n"},
    {"start: 2, start_sd: 2", "start: 2, start_sd: -1e-3",
     "5:41: states.level.start_sd: is -1e-3; must be greater than 0\n"},
    {"needs: 0.05", "needs: 0",
     "5:51: states.level.needs: is 0; must be greater than 0\n"},
    {"needs: 0.05", "need: 0.05",
     "5:44: states.level.need: is not a known key; did you mean needs?\n"},
    {"{unit: m, start: 2", "{unit: [m], start: 2",
     "5:18: states.level.unit: is a list; must be text\n"},
    {"{unit: m, start: 2", "{unit: \"m\\u0007\", start: 2",
     "5:18: states.level.unit: is m?; must be text without control characters\n"},
    {"  level:  {unit: m, start: 2, start_sd: 2, needs: 0.05}", "  level: 2",
     "5:10: states.level: is 2; must be a map with the keys unit, start, start_sd, needs\n"},
    // inputs
    {"range: [0, 0.15]", "range: [0.15, 0]",
     "8:63: inputs.pump.range: is [0.15, 0]; its low end must be below its high end\n"},
    {"range: [0, 0.15]", "range: [0, 0]",
     "8:63: inputs.pump.range: is [0, 0]; its low end must be below its high end\n"},
    {"range: [0, 0.15]", "range: [0]",
     "8:63: inputs.pump.range: is a list of 1; must be a list of two numbers, [low, high]\n"},
    {"range: [0, 0.15]", "range: 0.15",
     "8:63: inputs.pump.range: is 0.15; must be a list of two numbers, [low, high]\n"},
    {"range: [0, 0.15]", "range: [0, much]",
     "8:67: inputs.pump.range: is much; must be a finite number\n"},
    {", range: [0, 0.15]", "",
     "8:3: inputs.pump.range: is missing\n"},
    {"start: 0, sd: 0.003", "start: 1, sd: 0.003",
     "8:29: inputs.pump.start: is 1; must be inside the range\n"},
    {"start: 0, sd: 0.003", "start: -1, sd: 0.003",
     "8:29: inputs.pump.start: is -1; must be inside the range\n"},
    {"start: 0, sd: 0.003", "sd: 0.003",
     "8:3: inputs.pump.start: is missing\n"},
    {"sd: 0.003", "sd: -0.003",
     "8:36: inputs.pump.sd: is -0.003; must be at least 0\n"},
    {"period: 1 s", "period: 1",
     "8:51: inputs.pump.period: is 1; must be a duration with its unit (ms, s, min, h, d), such as 60 s\n"},
    {"  pump: {", "  inflow: {",
     "8:3: inputs.inflow: has the name of a state (line 6); each name stands for one thing\n"
     "10:10: motion.level: position 11: pump is not a state, input, constant or function; known are "
     "level, inflow, area, t, _e, _pi\n"},
    // motion and unrest
    {"  level: (inflow", "  levl: (inflow",
     "10:3: motion.levl: is not a state; did you mean level?\n"},
    {"(inflow - pump) / area", "(inflow - pmp) / aera",
     "10:10: motion.level: position 11: pmp is not a state, input, constant or function; did you mean "
     "pump?\n"
     "10:10: motion.level: position 18: aera is not a state, input, constant or function; did you mean "
     "area?\n"},
    {"(inflow - pump) / area", "(inflow - pump / area",
     "10:10: motion.level: position 1: this ( is never closed\n"},
    {"(inflow - pump) / area", "(inflow - pump) / ",
     "10:10: motion.level: position 18: ends too early\n"},
    {"(inflow - pump) / area", "(inflow - pump)) / area",
     "10:10: motion.level: position 16: this ) closes nothing\n"},
    {"(inflow - pump) / area", "inflow - - / area",
     "10:10: motion.level: position 12: an operator (/) has nothing to work on\n"},
    {"(inflow - pump) / area", "inflow pump",
     "10:10: motion.level: position 8: an operator is missing before pump\n"},
    {"(inflow - pump) / area", "level = 3",
     "10:10: motion.level: position 7: = does not compare; write == to compare\n"},
    {"(inflow - pump) / area", "3, 4",
     "10:10: motion.level: position 2: a comma separates arguments of a function; decimals take a point\n"},
    {"(inflow - pump) / area", "sin + 1",
     "10:10: motion.level: position 1: sin is a function; it needs its arguments in ( )\n"},
    {"(inflow - pump) / area", "area (level)",
     "10:10: motion.level: position 1: area is not a function; a * is missing before the (\n"},
    {"(inflow - pump) / area", "atan2(level)",
     "10:10: motion.level: position 12: atan2 has too few arguments\n"},
    {"(inflow - pump) / area", "sin(level, 2)",
     "10:10: motion.level: position 13: sin has too many arguments\n"},
    {"(inflow - pump) / area", "level ? 2",
     "10:10: motion.level: a choice is written condition ? value : value\n"},
    {"(inflow - pump) / area", "level * 2µ",
     "10:10: motion.level: position 10: µ has no meaning in a formula\n"},
    {"(inflow - pump) / area", "level * 1e400",
     "10:10: motion.level: position 9: 1e400 is too large a number\n"},
    {"(inflow - pump) / area", "\"\"",
     "10:10: motion.level: is empty; must be a formula\n"},
    {"(inflow - pump) / area", "[inflow]",
     "10:10: motion.level: is a list; must be a formula or a number\n"},
    {"(inflow - pump) / area", "1 / (level - 2)",
     "10:10: motion.level: gives inf at the start; must be finite there\n"},
    {"(inflow - pump) / area", "sqrt(-level)",
     "10:10: motion.level: gives nan at the start; must be finite there\n"},
    {"(inflow - pump) / area", "nonsense",
     "10:10: motion.level: position 1: nonsense is not a state, input, constant or function; known are "
     "level, inflow, pump, area, t, _e, _pi\n"},
    {"(inflow - pump) / area", "level +* 2",
     "10:10: motion.level: position 8: an operator (*) has nothing to work on\n"},
    {"{inflow: 0.002}", "{inflow: -0.002}",
     "11:18: unrest.inflow: is -0.002; must be at least 0\n"},
    {"{inflow: 0.002}", "{pump: 0.002}",
     "11:10: unrest.pump: is not a state; known are level, inflow\n"},
    {"{inflow: 0.002}", "{inflow: level}",
     "11:18: unrest.inflow: is level; must be a number, at least 0\n"},
    // jolts and still
    {"times: 5", "times: 0",
     "12:44: jolts.times: is 0; must be greater than 0\n"},
    {"{every: 20 min, last: 1 min, times: 5}", "never",
     "12:8: jolts: is never; must be none, or a map {every, last, times}\n"},
    {"{every: 20 min, last: 1 min, times: 5}", "{each: 20 min}",
     "12:9: jolts.each: is not a known key; known are every, last, times\n"},
    {"jolts: {every", "still: {every: 0 s}\njolts: {every",
     "12:16: still.every: is 0 s; must be longer than 0\n"},
    // channels
    {"sd: 0.004", "sd: -0.01",
     "14:29: channels.sonic.sd: is -0.01; must be greater than 0\n"},
    {"sd: 0.004", "sd: 0",
     "14:29: channels.sonic.sd: is 0; must be greater than 0\n"},
    {"sd: 0.004", "sd: level - 2",
     "14:29: channels.sonic.sd: gives 0 at the start; must be finite and greater than 0 there\n"},
    {"sd: 0.004", "sd: 0.004*lvl",
     "14:29: channels.sonic.sd: position 7: lvl is not a state, input, constant or function; did you "
     "mean level?\n"},
    {"sd: 0.004", "sd: [0.004, 0.004]",
     "14:29: channels.sonic.sd: is a list; must be a formula or a number\n"},
    {"sd: 0.004, ", "",
     "14:3: channels.sonic.sd: is missing\n"},
    {"reads: level, ", "",
     "14:3: channels.sonic.reads: is missing\n"},
    {"resolution: 0.001", "rezolution: 0.001",
     "14:51: channels.sonic.rezolution: is not a known key; did you mean resolution?\n"},
    {"resolution: 0.001", "resolution: -0.001",
     "14:63: channels.sonic.resolution: is -0.001; must be at least 0\n"},
    {"resolution: 0.001", "resolution: 6",
     "14:63: channels.sonic.resolution: is 6; must be less than the width of the range\n"},
    {"resolution: 0.001", "signal: 0-10 V",
     "14:59: channels.sonic.signal: is 0-10 V; must be 4-20 mA\n"},
    {"resolution: 0.001", "modulo: 0",
     "14:59: channels.sonic.modulo: is 0; must be greater than 0\n"},
    {"resolution: 0.001", "bias_sd: -1",
     "14:60: channels.sonic.bias_sd: is -1; must be at least 0\n"},
    {"resolution: 0.001", "strays: 0.5",
     "14:59: channels.sonic.strays: is 0.5; must be greater than 0 and less than 0.5\n"},
    {"resolution: 0.001", "strays: 0",
     "14:59: channels.sonic.strays: is 0; must be greater than 0 and less than 0.5\n"},
    {"resolution: 0.001", "offset_size: 0",
     "14:64: channels.sonic.offset_size: is 0; must be greater than 0\n"},
    {"resolution: 0.001", "prior_readings: 2",
     "14:67: channels.sonic.prior_readings: is 2; must be greater than 2\n"},
    {"resolution: 0.001", "fails_every: 30",
     "14:64: channels.sonic.fails_every: is 30; must be a duration with its unit (ms, s, min, h, d), "
     "such as 60 s\n"},
    {"resolution: 0.001", "memory: 0 s",
     "14:59: channels.sonic.memory: is 0 s; must be longer than 0\n"},
    {"resolution: 0.001", "delay: -1 s",
     "14:58: channels.sonic.delay: is -1 s; must be 0 or longer\n"},
    {"resolution: 0.001", "time_sd: 5",
     "14:60: channels.sonic.time_sd: is 5; must be a duration with its unit (ms, s, min, h, d), such as "
     "60 s\n"},
    {"resolution: 0.001", "correlation: 1",
     "14:64: channels.sonic.correlation: is 1; must be at least 0 and less than 1\n"},
    {"resolution: 0.001", "on_change: {deadbnd: 1}",
     "14:51: channels.sonic.on_change.deadband: is missing\n"
     "14:63: channels.sonic.on_change.deadbnd: is not a known key; did you mean deadband?\n"},
    {"resolution: 0.001", "tag: [LIT]",
     "14:56: channels.sonic.tag: is a list; must be text\n"},
    {"cutoff: 0.005", "cutoff: 0.5",
     "19:13: channels.meter.cutoff: is 0.5; must be inside the range\n"},
    {"cutoff: 0.005", "cutoff: none",
     "19:13: channels.meter.cutoff: is none; must be a finite number\n"},
    {"range: [0, 6]", "range: [6, 0]",
     "14:43: channels.sonic.range: is [6, 0]; its low end must be below its high end\n"},
    {"range: [0, 6]", "range: [0, 6, 7]",
     "14:43: channels.sonic.range: is a list of 3; must be a list of two numbers, [low, high]\n"},
    {"  meter:", "  pump:",
     "15:3: channels.pump: has the name of an input (line 8); each name stands for one thing\n"},
    {"  meter:", "  \"\":",
     "15:3: channels.\"\": is not a name; a name is a small letter, then small letters, digits and _, "
     "at most 63 characters\n"},
    // vector channels
    {"reads: level, sd: 0.004, range: [0, 6]", "reads: [level, inflow], sd: 1, range: [[0, 6], [1, 0]]",
     "14:39: channels.sonic.sd: is 1; must be a list of 2, one for each part of reads\n"
     "14:58: channels.sonic.range[2]: is [1, 0]; its low end must be below its high end\n"},
    {"reads: level, sd: 0.004, range: [0, 6]", "reads: [level, inflw], sd: [1, 0], range: [[0, 6], [0, 1]]",
     "14:26: channels.sonic.reads[2]: position 1: inflw is not a state, input, constant or function; did you "
     "mean inflow?\n"
     "14:42: channels.sonic.sd[2]: is 0; must be greater than 0\n"},
    {"reads: level, sd: 0.004, range: [0, 6]", "reads: [level, inflow], sd: [1, 1, 1], range: [0, 6]",
     "14:39: channels.sonic.sd: is a list of 3; must be a list of 2, one for each part of reads\n"
     "14:58: channels.sonic.range[1]: is 0; must be a list of two numbers, [low, high]\n"
     "14:61: channels.sonic.range[2]: is 6; must be a list of two numbers, [low, high]\n"},
    {"reads: level, sd: 0.004, range: [0, 6], resolution: 0.001",
     "reads: [level, inflow], sd: [1, 1], range: [[0, 6], [0, 1]], resolution: [0.1, 2], bias_sd: -1, "
     "offset_size: [1, 0]",
     "14:90: channels.sonic.resolution[2]: is 2; must be less than the width of the range\n"
     "14:103: channels.sonic.bias_sd: is -1; must be at least 0\n"
     "14:124: channels.sonic.offset_size[2]: is 0; must be greater than 0\n"},
    {"reads: level, sd: 0.004, range: [0, 6], resolution: 0.001",
     "reads: [level, inflow], sd: [1, 1], range: [[0, 6], [0, 1]], resolution: 2, bias_sd: [1]",
     "14:84: channels.sonic.resolution: is 2; must be less than the width of the range\n"
     "14:96: channels.sonic.bias_sd: is a list of 1; must be a list of 2, one for each part of reads\n"},
    {"reads: level, sd: 0.004, range: [0, 6], resolution: 0.001",
     "reads: [level, inflow], sd: [1, 1], range: [[0, 6], [0, 1]], modulo: 2, cutoff: 1, signal: 4-20 mA, "
     "on_change: {deadband: 1}",
     "14:72: channels.sonic.modulo: is given for a channel of 2 parts; must be left out there\n"
     "14:83: channels.sonic.cutoff: is given for a channel of 2 parts; must be left out there\n"
     "14:94: channels.sonic.signal: is given for a channel of 2 parts; must be left out there\n"
     "14:111: channels.sonic.on_change: is given for a channel of 2 parts; must be left out there\n"},
    {"reads: level, sd: 0.004, range: [0, 6], resolution: 0.001",
     "reads: [level, inflow, level], sd: [1, 1, 1], range: [[0, 6], [0, 1], [0, 6]], correlation: 0.5",
     "14:103: channels.sonic.correlation: is 0.5; must be a list of 3, one for each pair of parts, (1,2), "
     "(1,3) … (2,3) …\n"},
    {"reads: level, sd: 0.004, range: [0, 6], resolution: 0.001",
     "reads: [level, inflow, level], sd: [1, 1, 1], range: [[0, 6], [0, 1], [0, 6]], correlation: "
     "[0.1, 1, x]",
     "14:109: channels.sonic.correlation[2]: is 1; must be greater than -1 and less than 1\n"
     "14:112: channels.sonic.correlation[3]: is x; must be a number, greater than -1 and less than 1\n"},
    {"reads: level, sd: 0.004, range: [0, 6], resolution: 0.001",
     "reads: [level, inflow, level], sd: [1, 1, 1], range: [[0, 6], [0, 1], [0, 6]], correlation: [0.9, 0.9, "
     "-0.9]",
     "14:103: channels.sonic.correlation: gives the parts correlations that no noise can have; their matrix "
     "must be positive definite\n"},
    // noise and time
    {"resolution: 0.001", "correlation: 0.5",
     "14:64: channels.sonic.correlation: is 0.5; must be 0 without a period: it is between readings one "
     "period apart\n"},
    {"resolution: 0.001", "period: 1 s, correlation: -0.1",
     "14:77: channels.sonic.correlation: is -0.1; must be at least 0 and less than 1\n"},
    {"resolution: 0.001", "correlation: [0.5]",
     "14:64: channels.sonic.correlation: is a list; must be a number, at least 0 and less than 1\n"},
    {"resolution: 0.001", "time_sd: -5 ms",
     "14:60: channels.sonic.time_sd: is -5 ms; must be 0 or longer\n"},
    {"resolution: 0.001", "on_change: {deadband: 0, heartbeat: 0 s}",
     "14:73: channels.sonic.on_change.deadband: is 0; must be greater than 0\n"
     "14:87: channels.sonic.on_change.heartbeat: is 0 s; must be longer than 0\n"},
    {"resolution: 0.001", "on_change: {deadband: 6}",
     "14:73: channels.sonic.on_change.deadband: is 6; must be less than the width of the range\n"},
    {"resolution: 0.001", "on_change: 0.1",
     "14:62: channels.sonic.on_change: is 0.1; must be a map with the keys deadband, heartbeat\n"
     },
    // common causes
    {"channels:", "freeze_share: 1.1\nchannels:",
     "13:15: freeze_share: is 1.1; must be at least 0 and at most 1\n"},
    {"channels:", "common: [{channels: [sonic, meter], share: 0.6}, {channels: [meter, sonic], share: 0.5}]\n"
     "channels:",
     "13:9: common: gives sonic shares that add up to 1.1; must be at most 1\n"
     "13:9: common: gives meter shares that add up to 1.1; must be at most 1\n"},
    {"channels:", "common: [{channels: [sonic, metre], share: 1}]\nchannels:",
     "13:29: common[1].channels: metre is not a channel; did you mean meter?\n"
     "13:44: common[1].share: is 1; must be greater than 0 and less than 1\n"},
    {"channels:", "common: [{channels: [sonic]}]\nchannels:",
     "13:10: common[1].share: is missing\n"
     "13:21: common[1].channels: is a list; must be a list of at least two channels\n"},
    {"channels:", "common: [{channels: [sonic, sonic], share: 0.1}]\nchannels:",
     "13:29: common[1].channels: sonic is listed twice\n"},
    {"channels:", "common: {channels: [sonic]}\nchannels:",
     "13:9: common: is a map; must be a list of groups {channels, share}\n"},
};
// clang-format on

std::string with_file(std::string_view expected) {
  std::string out;
  while (!expected.empty()) {
    const std::size_t end = expected.find('\n') + 1;
    out += "basin.yaml:" + std::string(expected.substr(0, end));
    expected.remove_prefix(end);
  }
  return out;
}

TEST(WrongDescription, SaysWhereWhatAndWhich) {
  for (const Row& row : kRows) {
    EXPECT_EQ(problems_of(basin_with(row.from, row.to)), with_file(row.expected))
        << row.from << " → " << row.to;
  }
}

TEST(WrongDescription, TheRightOneHasNoProblems) { EXPECT_EQ(problems_of(kBasin), ""); }

TEST(WrongDescription, EveryErrorIsListedInTheOrderOfTheText) {
  const std::string text = R"(rig: Basin
response: 60
states:
  level: {unit: m, start: 2, start_sd: 0}
motion: {level: (inflw - 1) / 2}
channels:
  sonic: {reads: level, sd: -0.01, range: [6, 0], rezolution: 0.001}
inputs:
  inflow: {unit: m3/s, start: 0, sd: 0.1, range: [0, 1]}
)";
  EXPECT_EQ(
      problems_of(text),
      "basin.yaml:1:6: rig: is Basin; must be 1 to 63 small letters, digits and -\n"
      "basin.yaml:2:11: response: is 60; must be a duration with its unit (ms, s, min, h, d), such as 60 s\n"
      "basin.yaml:4:40: states.level.start_sd: is 0; must be greater than 0\n"
      "basin.yaml:5:17: motion.level: position 2: inflw is not a state, input, constant or function; "
      "did you mean inflow?\n"
      "basin.yaml:7:29: channels.sonic.sd: is -0.01; must be greater than 0\n"
      "basin.yaml:7:43: channels.sonic.range: is [6, 0]; its low end must be below its high end\n"
      "basin.yaml:7:51: channels.sonic.rezolution: is not a known key; did you mean resolution?\n");
}

// What the design promises, character by character.
TEST(WrongDescription, ReadsAsTheDesignSays) {
  std::string text(kBasin);
  text.replace(text.find("sd: 0.004"), 9, "sd: -0.01");
  EXPECT_EQ(load(text, "basin.yaml").problems.at(0).text(),
            "basin.yaml:14:29: channels.sonic.sd: is -0.01; must be greater than 0");
}

}  // namespace
}  // namespace steelyard::rig
