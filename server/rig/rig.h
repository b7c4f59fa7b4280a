// SPDX-License-Identifier: Apache-2.0
// From a rig description (YAML text, or the same as JSON) to a checked rig that the engine can run.
#pragma once

#include <memory>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "engine/model.h"

namespace steelyard::rig {

/// One error in a description. All of them are listed, in the order of the text.
struct Problem {
  std::string file;     ///< as given by the caller
  int line = 0;         ///< from 1; 0: the position is not known
  int column = 0;       ///< from 1
  std::string field;    ///< e.g. channels.sonic.sd; empty for errors of the text as a whole
  std::string message;  ///< value seen and rule broken, e.g. "is -0.01; must be greater than 0"
  /// "basin.yaml:14:18: channels.sonic.sd: is -0.01; must be greater than 0"
  [[nodiscard]] std::string text() const;
};

/// What the maintainer knows of a channel, for reports; the engine does not use it.
struct ChannelLabels {
  std::string tag;
  std::string where;
  std::string serial;
  std::string note;
};

/// A name that a log or a source may use.
struct Signal {
  bool is_input = false;
  int index = 0;  ///< into model->inputs or model->channels
};

struct Rig {
  std::string name;
  std::shared_ptr<const engine::Model> model;  ///< its formulas are used by one thread at a time
  double response_s = 0.0;
  double horizon_s = 0.0;
  double lag_s = 0.0;
  bool motion_is_affine = false;
  std::vector<bool> reading_is_affine;  ///< by channel
  std::vector<ChannelLabels> labels;    ///< by channel
  std::string text;                     ///< the description as it was given
  [[nodiscard]] std::optional<Signal> find(std::string_view signal) const;
};

struct Loaded {
  std::shared_ptr<const Rig> rig;  ///< null if there are problems
  std::vector<Problem> problems;
};

/// Never throws for anything in `text`. `file` is used in messages alone. States, inputs and channels have
/// the order of the text; those of a JSON object, whose maps come in any order, the bytewise order of their
/// names.
[[nodiscard]] Loaded load(std::string_view text, std::string_view file);

/// The same description as JSON (a proto3 JSON form of steelyard.v1.Rig); text must be one that load()
/// accepts.
[[nodiscard]] std::string to_json(std::string_view text);

/// "250 ms", "60 s", "5 min", "2 h", "30 d" → seconds; nullopt if it is not of this form.
[[nodiscard]] std::optional<double> parse_duration_s(std::string_view text);
/// The shortest of those forms, e.g. 3600 → "1 h".
[[nodiscard]] std::string duration_text(double seconds);

}  // namespace steelyard::rig
