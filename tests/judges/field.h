// SPDX-License-Identifier: Apache-2.0
// Real readings of overlapping sensors, and a rig written for each set: two thermometers of a sensor network
// and twelve wind gauges. Sources and licences: tests/outside/data/README.md.
#pragma once

#include <memory>
#include <string>
#include <vector>

#include "engine/model.h"
#include "judges/spell.h"

namespace steelyard::judges {

struct Field {
  std::string name;
  std::string unit;  ///< of what the sensors show
  std::shared_ptr<const engine::Model> model;
  std::vector<std::vector<double>> shown;  ///< by time, then channel
  double period_days = 1.0;
  std::size_t first = 0;  ///< from here on it counts: before, the rig was fitted or the engine settles
  std::size_t onset = 0;  ///< where faults begin
  /// Channels that faults are put on, in turn. The first is judged, the others are shown: a fault of the
  /// second thermometer is all but the same as a change of the gap between the places, which the rig lets
  /// wander.
  /// Channels that faults are put on, in turn. The first is judged, the others are shown: a fault of the
  /// second thermometer is all but the same as a change of the gap between the places, which the rig lets
  /// wander.
  std::vector<int> victims;
  std::vector<Fault> faults;
  bool one_vector = false;   ///< what is shown are the parts of one vector channel, not channels of their own
  bool square_root = false;  ///< the rig reads the square root of what is shown
};

[[nodiscard]] Field thermometers();
[[nodiscard]] Field wind();
/// The same gauges as the parts of one vector channel: their noise is correlated as the three lesser states
/// of wind() make it, and there is one state.
[[nodiscard]] Field wind_vector();
[[nodiscard]] std::string sensor_name(const Field& field, std::size_t column);

/// What the engine is given for a shown value: rounded as the instrument does, within its range.
[[nodiscard]] double as_read(const Field& field, std::size_t column, double shown);

}  // namespace steelyard::judges
