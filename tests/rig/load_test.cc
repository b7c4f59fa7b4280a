// SPDX-License-Identifier: Apache-2.0
// Right descriptions: what they become, and the defaults.
#include <gtest/gtest.h>

#include <cmath>
#include <fstream>
#include <iterator>
#include <string>
#include <variant>
#include <vector>

#include "descriptions.h"
#include "models.h"

namespace steelyard::rig {
namespace {

std::shared_ptr<const Rig> loaded(std::string_view text) {
  Loaded out = load(text, "basin.yaml");
  for (const Problem& problem : out.problems) ADD_FAILURE() << problem.text();
  return out.rig;
}

TEST(Load, EveryPartArrives) {
  const auto rig = loaded(kBasin);
  ASSERT_TRUE(rig);
  const engine::Model& model = *rig->model;
  EXPECT_EQ(rig->name, "basin");
  EXPECT_EQ(rig->text, kBasin);
  ASSERT_EQ(model.states.size(), 2U);
  EXPECT_EQ(model.states[0].name, "level");
  EXPECT_EQ(model.states[0].unit, "m");
  EXPECT_EQ(model.states[0].start, 2.0);
  EXPECT_EQ(model.states[0].start_sd, 2.0);
  EXPECT_EQ(model.states[0].needs, 0.05);
  EXPECT_EQ(model.states[0].unrest, 0.0);
  EXPECT_EQ(model.states[1].unrest, 0.002);
  EXPECT_EQ(model.states[1].needs, std::nullopt);
  ASSERT_EQ(model.inputs.size(), 1U);
  EXPECT_EQ(model.inputs[0].sd, 0.003);
  EXPECT_EQ(model.inputs[0].period_s, 1.0);
  EXPECT_EQ(model.inputs[0].hi, 0.15);
  EXPECT_EQ(model.jolt.every_s, 1200.0);
  EXPECT_EQ(model.jolt.last_s, 60.0);
  EXPECT_EQ(model.jolt.times, 5.0);
}

TEST(Load, ChannelsArrive) {
  const auto rig =
      loaded(basin_with("resolution: 0.001}",
                        "resolution: 0.001, bias_sd: 0.01, period: 1 s, delay: 5 s, signal: 4-20 mA,\n"
                        "    fails_every: 60 d, recovers_in: 1 h, changes_in: 2 h, memory: 3 h, "
                        "strays: 0.01,\n    offset_size: 0.5, prior_readings: 12, tag: 101, where: roof, "
                        "serial: A1, note: \"new: 2024\"}"));
  ASSERT_TRUE(rig);
  const engine::ChannelModel& sonic = rig->model->channels[0];
  EXPECT_EQ(sonic.unit, "m");
  EXPECT_EQ(sonic.sd, 0.004);
  EXPECT_FALSE(sonic.sd_formula);
  EXPECT_EQ(sonic.bias_sd, 0.01);
  EXPECT_EQ(sonic.resolution, 0.001);
  EXPECT_EQ(sonic.period_s, 1.0);
  EXPECT_EQ(sonic.delay_s, 5.0);
  EXPECT_TRUE(sonic.live_zero);
  EXPECT_EQ(sonic.fails_every_s, 60 * 86400.0);
  EXPECT_EQ(sonic.recovers_in_s, 3600.0);
  EXPECT_EQ(sonic.changes_in_s, 7200.0);
  EXPECT_EQ(sonic.memory_s, 10800.0);
  EXPECT_EQ(sonic.strays, 0.01);
  EXPECT_EQ(sonic.offset_size, 0.5);
  EXPECT_EQ(sonic.prior_readings, 12.0);
  EXPECT_EQ(rig->labels[0].tag, "101");
  EXPECT_EQ(rig->labels[0].where, "roof");
  EXPECT_EQ(rig->labels[0].serial, "A1");
  EXPECT_EQ(rig->labels[0].note, "new: 2024");
  const engine::ChannelModel& meter = rig->model->channels[1];
  EXPECT_EQ(meter.cutoff, 0.005);
  ASSERT_TRUE(meter.sd_formula);
  EXPECT_DOUBLE_EQ(meter.sd, 0.003);  // 0.001 + 0.02·0.1, at the start
  EXPECT_FALSE(meter.live_zero);
}

// kBasin's sonic turned into a vector channel of level and inflow, with `more` keys.
std::string vector_basin(std::string_view more) {
  return basin_with(
      "reads: level, sd: 0.004, range: [0, 6], resolution: 0.001",
      "reads: [level, 2*inflow], sd: [0.004, 0.1 + level], range: [[0, 6], [-1, 2]]" + std::string(more));
}

TEST(Load, VectorChannelsArrivePartByPart) {
  const auto rig = loaded(vector_basin(
      ", bias_sd: [1, 2], resolution: [0.1, 0.2], offset_size: [3, 4], correlation: [-0.5], unit: m"));
  ASSERT_TRUE(rig);
  const engine::ChannelModel& sonic = rig->model->channels[0];
  ASSERT_EQ(sonic.parts(), 2);
  EXPECT_EQ(sonic.sd, 0.004);
  ASSERT_TRUE(sonic.part(1).sd_formula);
  EXPECT_DOUBLE_EQ(sonic.part(1).sd, 2.1);  // at the start
  EXPECT_EQ(value_of(sonic.part(1).reads, {2, 0.5}, {0}), 1.0);
  EXPECT_EQ(sonic.part(1).lo, -1.0);
  EXPECT_EQ(sonic.part(1).hi, 2.0);
  EXPECT_EQ(sonic.bias_sd, 1.0);
  EXPECT_EQ(sonic.part(1).bias_sd, 2.0);
  EXPECT_EQ(sonic.part(1).resolution, 0.2);
  EXPECT_EQ(sonic.part(1).offset_size, 4.0);
  EXPECT_EQ(sonic.part(1).unit, "m");
  EXPECT_EQ(sonic.part_correlation, std::vector<double>{-0.5});
  EXPECT_EQ(rig->reading_is_affine, (std::vector<bool>{true, true}));
}

TEST(Load, PartsHaveDefaultsOfTheirOwnAndMayShareANumber) {
  const auto rig = loaded(vector_basin(", bias_sd: 0.25"));
  ASSERT_TRUE(rig);
  const engine::ChannelModel& sonic = rig->model->channels[0];
  EXPECT_DOUBLE_EQ(sonic.offset_size, 0.6);
  EXPECT_DOUBLE_EQ(sonic.part(1).offset_size, 0.3);
  EXPECT_EQ(sonic.unit, "m");
  EXPECT_EQ(sonic.part(1).unit, "");
  EXPECT_EQ(sonic.bias_sd, 0.25);
  EXPECT_EQ(sonic.part(1).bias_sd, 0.25);
  EXPECT_EQ(sonic.part(1).resolution, 0.0);
  EXPECT_TRUE(sonic.part_correlation.empty());
  const auto curved = loaded(basin_with("reads: level, sd: 0.004, range: [0, 6], resolution: 0.001",
                                        "reads: [level, level^2], sd: [1, 1], range: [[0, 6], [0, 9]]"));
  ASSERT_TRUE(curved);
  EXPECT_FALSE(curved->reading_is_affine[0]);
}

TEST(Load, AListOfOneIsAScalarChannel) {
  const auto rig = loaded(basin_with("reads: level, sd: 0.004, range: [0, 6], resolution: 0.001",
                                     "reads: [level], sd: [0.5], range: [[0, 6]], modulo: 6"));
  ASSERT_TRUE(rig);
  EXPECT_EQ(rig->model->channels[0].parts(), 1);
  EXPECT_EQ(rig->model->channels[0].sd, 0.5);
  EXPECT_EQ(rig->model->channels[0].modulo, 6.0);
}

TEST(Load, NoiseTimeAndCommonCausesArrive) {
  const auto rig = loaded(basin_with("resolution: 0.001}",
                                     "period: 1 s, correlation: 0.8, time_sd: 5 ms,\n"
                                     "    on_change: {deadband: 0.02, heartbeat: 1 min}}") +
                          "common: [{channels: [meter, sonic], share: 0.2}]\nfreeze_share: 0\n");
  ASSERT_TRUE(rig);
  const engine::ChannelModel& sonic = rig->model->channels[0];
  EXPECT_EQ(sonic.correlation, 0.8);
  EXPECT_DOUBLE_EQ(sonic.time_sd_s, 0.005);
  ASSERT_TRUE(sonic.on_change);
  EXPECT_EQ(sonic.on_change->deadband, 0.02);
  EXPECT_EQ(sonic.on_change->heartbeat_s, 60.0);
  ASSERT_EQ(rig->model->common.size(), 1U);
  EXPECT_EQ(rig->model->common[0].channels, (std::vector<int>{1, 0}));
  EXPECT_EQ(rig->model->common[0].share, 0.2);
  EXPECT_EQ(rig->model->freeze_share, 0.0);
  const auto plain = loaded(kBasin);
  ASSERT_TRUE(plain);
  EXPECT_EQ(plain->model->freeze_share, 0.1);
  EXPECT_TRUE(plain->model->common.empty());
  EXPECT_FALSE(plain->model->channels[0].on_change);
}

// 32 parts of all channels together: 2 of 16 pass, one more part is one too many.
TEST(Load, PartsAreCountedOverAllChannels) {
  const auto rig_of = [](int parts_of_second) {
    std::string text = "rig: many\nresponse: 1 s\nstates: {x: {unit: m, start: 0, start_sd: 1}}\nchannels:\n";
    for (const int parts : {16, parts_of_second}) {
      std::string reads;
      std::string sds;
      std::string ranges;
      for (int i = 0; i < parts; ++i) {
        const std::string comma = i == 0 ? "" : ", ";
        reads += comma + "x";
        sds += comma + "1";
        ranges += comma + "[0, 1]";
      }
      const bool first = text.ends_with("channels:\n");
      text += std::string("  ") + (first ? "a" : "c") + std::to_string(parts) + ": {reads: [" + reads +
              "], sd: [" + sds + "], range: [" + ranges + "]}\n";
    }
    return text;
  };
  EXPECT_TRUE(loaded(rig_of(16)));
  EXPECT_EQ(problems_of(rig_of(17)),
            "basin.yaml:6:3: channels.c17: makes 33 parts in all channels; at most 32 are possible\n");
  EXPECT_EQ(problems_of(rig_of(33)),
            "basin.yaml:6:16: channels.c33.reads: has 33 parts; at most 32 are possible\n");
}

TEST(Load, DefaultsFollowTheResponseTime) {
  const auto rig = loaded(kBasin);
  ASSERT_TRUE(rig);
  EXPECT_EQ(rig->response_s, 60.0);
  EXPECT_EQ(rig->horizon_s, 600.0);
  EXPECT_EQ(rig->lag_s, 120.0);
  EXPECT_EQ(rig->model->response_s, 60.0);
  EXPECT_TRUE(rig->model->still.on);
  EXPECT_EQ(rig->model->still.every_s, 1200.0);
  EXPECT_EQ(rig->model->still.last_s, 600.0);
  const engine::ChannelModel& sonic = rig->model->channels[0];
  EXPECT_EQ(sonic.fails_every_s, 30 * 86400.0);
  EXPECT_EQ(sonic.recovers_in_s, 60000.0);
  EXPECT_EQ(sonic.changes_in_s, 600.0);
  EXPECT_EQ(sonic.memory_s, 300.0);
  EXPECT_EQ(sonic.strays, 0.001);
  EXPECT_DOUBLE_EQ(sonic.offset_size, 0.6);  // a tenth of the range
  EXPECT_EQ(sonic.prior_readings, 24.0);
  EXPECT_EQ(sonic.bias_sd, 0.0);
  EXPECT_EQ(sonic.delay_s, 0.0);
}

TEST(Load, ModesCanBeSwitchedOffOrSetInPart) {
  const auto off =
      loaded(basin_with("jolts: {every: 20 min, last: 1 min, times: 5}", "jolts: none\nstill: none"));
  ASSERT_TRUE(off);
  EXPECT_FALSE(off->model->jolt.on);
  EXPECT_FALSE(off->model->still.on);
  const auto part = loaded(basin_with("{every: 20 min, last: 1 min, times: 5}", "{times: 3}"));
  ASSERT_TRUE(part);
  EXPECT_EQ(part->model->jolt.every_s, 1200.0);
  EXPECT_EQ(part->model->jolt.last_s, 90.0);
  EXPECT_EQ(part->model->jolt.times, 3.0);
}

TEST(Load, AffineLawsAreFoundAndOthersStayFormulas) {
  const auto rig = loaded(kBasin);
  ASSERT_TRUE(rig);
  EXPECT_TRUE(rig->motion_is_affine);
  EXPECT_EQ(rig->reading_is_affine, (std::vector<bool>{true, true}));
  const auto& rate = std::get<engine::AffineForm>(rig->model->states[0].rate);
  EXPECT_EQ(rate.on_states, (std::vector<double>{0, 1 / 120.0}));
  EXPECT_EQ(rate.on_inputs, std::vector<double>{-1 / 120.0});
  for (const char* law :
       {"(inflow - pump*level) / area", "inflow + 0*t", "\"level > 1e9 ? inflow : 2*inflow\""}) {
    const auto other = loaded(basin_with("(inflow - pump) / area", law));
    ASSERT_TRUE(other);
    EXPECT_FALSE(other->motion_is_affine) << law;
    EXPECT_TRUE(std::holds_alternative<std::shared_ptr<engine::Formula>>(other->model->states[0].rate))
        << law;
  }
}

TEST(Load, PlainNumbersAreFormulasToo) {
  const auto rig = loaded(basin_with("(inflow - pump) / area", "-0.5"));
  ASSERT_TRUE(rig);
  EXPECT_EQ(std::get<engine::AffineForm>(rig->model->states[0].rate).constant, -0.5);
  const auto constant_sd = loaded(basin_with("sd: 0.004", "sd: area / 1000"));
  ASSERT_TRUE(constant_sd);
  EXPECT_FALSE(constant_sd->model->channels[0].sd_formula);
  EXPECT_DOUBLE_EQ(constant_sd->model->channels[0].sd, 0.12);
}

TEST(Load, UnitOfAChannelIsThatOfTheStateItReads) {
  const auto unit = [](std::string_view reads) {
    const auto rig =
        loaded(basin_with("reads: level, sd", std::string("reads: ") + std::string(reads) + ", sd"));
    return rig ? rig->model->channels[0].unit : "?";
  };
  EXPECT_EQ(unit("level"), "m");
  EXPECT_EQ(unit("level - 0.15"), "m");
  EXPECT_EQ(unit("6 - level"), "m");
  EXPECT_EQ(unit("1000*level"), "");
  EXPECT_EQ(unit("level + inflow"), "");
  EXPECT_EQ(unit("level^2"), "");
  EXPECT_EQ(unit("level + pump"), "");
  EXPECT_EQ(unit("1000*level, unit: mm"), "mm");
}

TEST(Load, SignalsAreFoundByName) {
  const auto rig = loaded(kBasin);
  ASSERT_TRUE(rig);
  ASSERT_TRUE(rig->find("pump"));
  EXPECT_TRUE(rig->find("pump")->is_input);
  ASSERT_TRUE(rig->find("meter"));
  EXPECT_FALSE(rig->find("meter")->is_input);
  EXPECT_EQ(rig->find("meter")->index, 1);
  EXPECT_FALSE(rig->find("level"));
}

TEST(Load, WindowsLinesAndByteOrderMarksAreNoMatter) {
  std::string text = "\xEF\xBB\xBF";
  for (const char c : kBasin) text += c == '\n' ? std::string("\r\n") : std::string(1, c);
  const auto rig = loaded(text);
  ASSERT_TRUE(rig);
  EXPECT_EQ(rig->text, text);
  expect_equal(*rig->model, *loaded(kBasin)->model);
}

TEST(Load, TheLargestRigThatIsAllowedLoads) {
  std::string text = "rig: large\nresponse: 1 s\nstates:\n";
  for (int i = 0; i < engine::kMaxStates; ++i) {
    text += "  s" + std::to_string(i) + ": {unit: m, start: 0, start_sd: 1}\n";
  }
  text += "inputs:\n";
  for (int i = 0; i < engine::kMaxInputs; ++i) {
    text += "  u" + std::to_string(i) + ": {unit: m, start: 0, range: [0, 1]}\n";
  }
  text += "channels:\n";
  for (int i = 0; i < engine::kMaxChannels; ++i) {
    text += "  c" + std::to_string(i) + ": {reads: s" + std::to_string(i % engine::kMaxStates) +
            ", sd: 1, range: [0, 9]}\n";
  }
  EXPECT_TRUE(loaded(text));
}

class Example : public testing::TestWithParam<const char*> {};

TEST_P(Example, Loads) {
  std::ifstream file(std::string(STEELYARD_DEMO) + "/" + GetParam() + ".yaml");
  const std::string text{std::istreambuf_iterator<char>(file), {}};
  ASSERT_FALSE(text.empty());
  const auto rig = loaded(text);
  ASSERT_TRUE(rig);
  EXPECT_EQ(rig->name, GetParam());
  EXPECT_EQ(rig->model->problem(), "");
}

INSTANTIATE_TEST_SUITE_P(Demo, Example, testing::Values("basin", "trolley", "cart"));

TEST(Example, TheTrolleyIsLinearAndTheCartIsNot) {
  const auto read = [](const std::string& name) {
    std::ifstream file(std::string(STEELYARD_DEMO) + "/" + name + ".yaml");
    return loaded(std::string{std::istreambuf_iterator<char>(file), {}});
  };
  const auto trolley = read("trolley");
  ASSERT_TRUE(trolley);
  EXPECT_TRUE(trolley->motion_is_affine);
  EXPECT_EQ(trolley->reading_is_affine, std::vector<bool>(3, true));
  const auto cart = read("cart");
  ASSERT_TRUE(cart);
  EXPECT_FALSE(cart->motion_is_affine);
  EXPECT_EQ(cart->reading_is_affine, (std::vector<bool>{false, false, false, true}));
  EXPECT_EQ(cart->model->channels[3].modulo, 360.0);
  // The hall's beacon from the start: from (30, 15) to (60, 5).
  EXPECT_DOUBLE_EQ(value_of(cart->model->channels[1].reads, {30, 15, 0}, {0, 0}), std::sqrt(1000.0));
  // Heading 90° is east.
  EXPECT_DOUBLE_EQ(value_of(cart->model->states[0].rate, {30, 15, 90}, {2, 0}), 2.0);
}

}  // namespace
}  // namespace steelyard::rig
