// SPDX-License-Identifier: Apache-2.0
// A description as JSON, there and back, also through the message of the wire.
#include <google/protobuf/util/json_util.h>
#include <gtest/gtest.h>

#include <fstream>
#include <iterator>
#include <string>

#include "descriptions.h"
#include "models.h"
#include "steelyard/v1/rig.pb.h"

namespace steelyard::rig {
namespace {

// Names of states, inputs and channels in bytewise order, as JSON has them; every key of the rig file.
constexpr std::string_view kOrdered = R"yaml(rig: ordered
response: 60 s
horizon: 5 min
lag: 1 min
constants: {area: 1.2e2, small: .5}
states:
  inflow: {unit: m3/s, start: 0.1, start_sd: 0.2}
  level:  {unit: m, start: -2, start_sd: 2, needs: 0.05}
inputs:
  pump: {unit: m3/s, start: 0, sd: 0.003, period: 1 s, range: [0, 0.15]}
motion: {inflow: 0, level: "(inflow - pump) / area * (level < 4 ? 1 : 0.5)"
}
unrest: {inflow: 0.002}
jolts: {every: 20 min, last: 1 min, times: 5}
still: none
channels:
  meter: {reads: inflow, sd: 0.001 + 0.02*abs(inflow), range: [0, 0.5], cutoff: 0.005, fails_every: 60 d}
  sonic: {reads: level, sd: 0.004, bias_sd: 0.01, range: [0, 6], resolution: 0.001, period: 1 s, delay: 5 s,
          recovers_in: 1 h, changes_in: 1 h, memory: 10 min, strays: 0.01, offset_size: 1, prior_readings: 8,
          signal: 4-20 mA, tag: 101, where: "roof \"east\" \\ µ", serial: "007", note: "a: b", modulo: 7}
)yaml";

void expect_same_rig(const std::string& json, std::string_view text) {
  const Loaded there = load(text, "text");
  const Loaded back = load(json, "json");
  for (const Problem& problem : back.problems) ADD_FAILURE() << problem.text() << "\n" << json;
  ASSERT_TRUE(there.rig && back.rig);
  expect_equal(*there.rig->model, *back.rig->model);
  EXPECT_EQ(there.rig->name, back.rig->name);
  EXPECT_EQ(there.rig->horizon_s, back.rig->horizon_s);
  EXPECT_EQ(there.rig->lag_s, back.rig->lag_s);
  for (std::size_t i = 0; i < there.rig->labels.size(); ++i) {
    EXPECT_EQ(there.rig->labels[i].tag, back.rig->labels[i].tag);
    EXPECT_EQ(there.rig->labels[i].where, back.rig->labels[i].where);
    EXPECT_EQ(there.rig->labels[i].serial, back.rig->labels[i].serial);
    EXPECT_EQ(there.rig->labels[i].note, back.rig->labels[i].note);
  }
}

TEST(Json, ThereAndBackIsTheSameRig) { expect_same_rig(to_json(kOrdered), kOrdered); }

TEST(Json, NumbersStayNumbersAndTextStaysText) {
  EXPECT_EQ(
      to_json("rig: 7\nresponse: 60 s\nconstants: {a: 1.50, b: \"2\"}\nmotion: {start: 0}\nstill: none\n"
              "channels: {c: {sd: 0.1, reads: x, range: [0, +6], tag: 12, note: 'a\"b'}, d: {sd: 0.1*x}}\n"),
      R"({"rig":"7","response":"60 s","constants":{"a":1.5,"b":"2"},"motion":{"start":"0"},"still":"none",)"
      R"("channels":{"c":{"sd":0.1,"reads":"x","range":[0,6],"tag":"12","note":"a\"b"},)"
      R"("d":{"sd":"0.1*x"}}})");
}

TEST(Json, OrderOfNamesInJsonIsNoMatter) {
  const std::string json = to_json(kBasin);  // level before inflow, sonic before meter
  const Loaded back = load(json, "json");
  ASSERT_TRUE(back.rig);
  EXPECT_EQ(back.rig->model->states[0].name, "inflow");
  EXPECT_EQ(back.rig->model->channels[0].name, "meter");
}

std::string through_the_message(const std::string& json) {
  v1::Rig message;
  const auto parsed = google::protobuf::util::JsonStringToMessage(json, &message);
  EXPECT_TRUE(parsed.ok()) << parsed.ToString() << "\n" << json;
  std::string out;
  EXPECT_TRUE(google::protobuf::util::MessageToJsonString(message, &out).ok());
  return out;
}

TEST(Json, TheMessageOfTheWireIsTheSameRig) {
  expect_same_rig(through_the_message(to_json(kOrdered)), kOrdered);
}

TEST(Json, ExamplesPassThroughTheMessage) {
  for (const char* name : {"basin", "trolley", "cart"}) {
    std::ifstream file(std::string(STEELYARD_DEMO) + "/" + name + ".yaml");
    const std::string json = to_json(std::string{std::istreambuf_iterator<char>(file), {}});
    SCOPED_TRACE(name);
    expect_same_rig(through_the_message(json), json);
  }
}

// Those of vector channels, of noise and time, and of common causes.
TEST(Json, EveryFormOfAKeyPassesThroughTheMessage) {
  const std::string text = R"yaml(rig: forms
response: 60 s
states:
  inflow: {unit: m3/s, start: 0.1, start_sd: 0.2}
  level:  {unit: m, start: -2, start_sd: 2}
freeze_share: 0.25
common: [{channels: [meter, sonic], share: 0.1}, {channels: [both, meter, sonic], share: 0.05}]
channels:
  both:  {reads: [level, 2*inflow, level], sd: [1, 0.1*abs(level), 2], range: [[0, 6], [0, 1], [-1, 1]],
          resolution: [0.1, 0.2, 0], bias_sd: 0.5, offset_size: [1, 2, 3], correlation: [0.5, -0.2, 0],
          time_sd: 5 ms, unit: m}
  meter: {reads: inflow, sd: 1, range: [0, 1], period: 1 s, correlation: 0.5, offset_size: 2}
  sonic: {reads: level, sd: 1, range: [0, 6], on_change: {deadband: 0.5, heartbeat: 1 min}}
)yaml";
  expect_same_rig(to_json(text), text);
  expect_same_rig(through_the_message(to_json(text)), text);
}

}  // namespace
}  // namespace steelyard::rig
