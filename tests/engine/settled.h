// SPDX-License-Identifier: Apache-2.0
// What the tests of settled estimates share.
#pragma once

#include <memory>
#include <utility>
#include <vector>

#include "engine/engine.h"

namespace steelyard::engine {

/// An engine whose settled estimates are gathered.
struct Settled {
  Settled(const Model& model, TimeNs lag, Detail detail = Detail::kBrief)
      : Settled(model, settling(lag, detail)) {}
  Settled(const Model& model, Settling s)
      : engine(std::make_shared<const Model>(model), [&] {
          s.settled = [this](const Estimate& e) { all.push_back(e); };
          return s;
        }()) {}
  Settled(const Settled&) = delete;
  static Settling settling(TimeNs lag, Detail detail) {
    Settling s;
    s.lag_ns = lag;
    s.detail = detail;
    return s;
  }
  std::vector<Estimate> all;
  Engine engine;
};

[[nodiscard]] inline double square(double x) { return x * x; }

}  // namespace steelyard::engine
