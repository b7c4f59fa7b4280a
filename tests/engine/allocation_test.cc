// SPDX-License-Identifier: Apache-2.0
// No allocation per reading after warm-up. Every allocation of this program is counted: operator new is
// replaced, and the linker wraps the C functions, which Eigen calls.
#include <gtest/gtest.h>

#include "engine/allocation_counter.h"
#include "engine/axis.h"
#include "engine/cases.h"

namespace steelyard::engine {
namespace {

TEST(Allocation, CounterSeesNewAndMalloc) {
  const long before = allocations();
  void* block = ::operator new(100);
  EXPECT_EQ(allocations() - before, 1);
  ::operator delete(block);
  const Eigen::MatrixXd matrix = Eigen::MatrixXd::Random(30, 30);
  EXPECT_EQ(allocations() - before, 2) << matrix(0, 0);
}

// Warmed up without a fault; the faults come while it is counted.
TEST(Allocation, NonePerReadingOnceWarm) {
  const auto readings = axis_readings(4);
  Engine engine(suite::axis_model({}, double_fault()));
  Estimate e;
  long counted = 0;
  for (int step = 0; step < 2600; ++step) {
    const long before = allocations();
    read_moment(engine, readings, step);
    engine.estimate(axis_time(step), Detail::kBrief, e);
    if (step > 500) counted += allocations() - before;
  }
  EXPECT_EQ(counted, 0);
}

TEST(Allocation, NonePerExtrapolatedBriefEstimate) {
  const auto readings = axis_readings(4);
  Engine engine(suite::axis_model({}, double_fault()));
  Estimate e;
  for (int step = 0; step < 1200; ++step) read_moment(engine, readings, step);
  engine.estimate(axis_time(1200), Detail::kBrief, e);
  const long before = allocations();
  for (int i = 0; i < 20; ++i) engine.estimate(axis_time(1200) + i * 10'000'000, Detail::kBrief, e);
  EXPECT_EQ(allocations() - before, 0);
}

struct Root : Formula {
  double evaluate(std::span<const double> states, std::span<const double> inputs, double) override {
    return inputs[0] - 0.1 * std::sqrt(std::fabs(states[0]));
  }
};

struct Bend : Formula {
  double evaluate(std::span<const double> states, std::span<const double>, double) override {
    return states[0] + 0.01 * states[0] * states[0];
  }
};

TEST(Allocation, NonePerReadingOfANonlinearMachineWithAnInput) {
  auto model = std::make_shared<Model>();
  model->states = {{"level", "m", 4.0, 1.0, 0.01, {}, std::make_shared<Root>()}};
  InputModel pump;
  pump.name = "pump";
  pump.start = 0.2;
  pump.sd = 0.001;
  pump.period_s = 1.0;
  pump.hi = 1.0;
  model->inputs = {pump};
  for (const char* name : {"one", "two"}) {
    ChannelModel c;
    c.name = name;
    c.reads = std::make_shared<Bend>();
    c.sd = 0.05;
    c.bias_sd = 0.05;
    c.lo = 0.0;
    c.hi = 10.0;
    model->channels.push_back(c);
  }
  set_defaults(*model, 10.0);
  Engine engine(model);
  Random random(5);
  Estimate e;
  long counted = 0;
  for (int step = 0; step < 600; ++step) {
    const TimeNs t = step * 1'000'000'000LL;
    const double a = 4.16 + 0.05 * random.normal();
    const double b = (step > 300 ? 5.0 : 4.16) + 0.05 * random.normal();
    const long before = allocations();
    if (step % 5 != 0) engine.set_input(t, 0, 0.2, true);  // runs out every fifth second
    engine.read(t, 0, a, Quality::kGood);
    engine.read(t, 1, b, Quality::kGood);
    engine.estimate(t, Detail::kBrief, e);
    if (step > 200) counted += allocations() - before;
  }
  EXPECT_EQ(counted, 0);
  EXPECT_LT(e.channels[1].trust, 0.5);
}

}  // namespace
}  // namespace steelyard::engine
