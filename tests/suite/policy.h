// SPDX-License-Identifier: Apache-2.0
// How one reference differs from the next: what it does with the readings of a step.
#pragma once

#include <memory>

#include "suite/filter.h"
#include "suite/references.h"

namespace steelyard::suite {

class Policy {
 public:
  explicit Policy(const Run& run) : run_(run) {}
  Policy(const Policy&) = delete;
  Policy& operator=(const Policy&) = delete;
  virtual ~Policy() = default;
  /// The filter has been predicted to this step.
  virtual void take(int step, Filter& filter) = 0;

 protected:
  [[nodiscard]] const Run& run() const { return run_; }
  [[nodiscard]] int channels() const { return static_cast<int>(run_.channels.size()); }
  [[nodiscard]] const Channel& channel(int j) const { return run_.channels[static_cast<std::size_t>(j)]; }
  [[nodiscard]] double declared_variance(int j) const {
    const double sd = run_.sd[static_cast<std::size_t>(j)];
    return sd * sd + rounding(channel(j));
  }
  [[nodiscard]] double true_variance(int j) const {
    return channel(j).sd * channel(j).sd + rounding(channel(j));
  }
  [[nodiscard]] Note note(int j, int step) const {
    return run_.readings.note[static_cast<std::size_t>(j)][static_cast<std::size_t>(step)];
  }
  [[nodiscard]] double value(int part, int step) const {
    return run_.readings.value[static_cast<std::size_t>(part)][static_cast<std::size_t>(step)];
  }
  /// Did anything come? A held value is a reading, a quiet channel is none.
  [[nodiscard]] bool came(int j, int step) const {
    return !std::isnan(value(run_.machine.first_part(j), step));
  }
  /// Fuses all parts of a channel's reading with this noise variance.
  void fuse(int j, int step, double r, Filter& filter) const;

 private:
  const Run& run_;
};

[[nodiscard]] std::unique_ptr<Policy> make_told(const Run& run);
[[nodiscard]] std::unique_ptr<Policy> make_informed(const Run& run);
[[nodiscard]] std::unique_ptr<Policy> make_variational(const Run& run);

}  // namespace steelyard::suite
