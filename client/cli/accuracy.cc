// SPDX-License-Identifier: Apache-2.0
#include "cli/accuracy.h"

#include <algorithm>
#include <iterator>
#include <numeric>
#include <vector>

#include "cli/observe.h"
#include "cli/report_text.h"
#include "cli/steady.h"

namespace steelyard::client {
namespace {

constexpr std::size_t kMostForPairs = 12;  // channels: each pair is a run of its own

using Channels = std::vector<int>;
using Cells = std::vector<std::string>;

class Table {
 public:
  explicit Table(const rig::Rig& rig)
      : rig_(rig),
        model_(*rig.model),
        at_start_(model_, start_of(model_)),
        near_start_(model_, near_start_of(model_)),
        all_(model_.channels.size()) {
    std::iota(all_.begin(), all_.end(), 0);
    // At its start a machine may by chance show less than anywhere else (a cart that stands still).
    elsewhere_ = at_start_.shown_states(all_) != shown_by(all_);
  }

  std::string text() {
    head();
    rows();
    const bool pairs = all_.size() <= kMostForPairs;
    if (!pairs) line("  pairs are told of up to " + std::to_string(kMostForPairs) + " channels");
    for (const engine::ChannelModel& channel : model_.channels) {
      if (channel.period_s > 0.0) continue;
      line("  " + channel.name + " has no period; here it reads every " +
           rig::duration_text(rig_.response_s / LongRun::kUsualReadings));
    }
    return std::move(out_);
  }

 private:
  void line(const std::string& text) { out_ += text + "\n"; }

  void head() {
    const bool affine =
        rig_.motion_is_affine && std::all_of(rig_.reading_is_affine.begin(), rig_.reading_is_affine.end(),
                                             [](bool one) { return one; });
    const std::string point = elsewhere_ ? "near the start" : "at the start";
    line("\nhow well the states are known in the long run: sd just after each channel has read");
    line("  after " + number(LongRun::kResponses) +
         " response times; channels sound, with the noise of their");
    line("  datasheets; usual unrest; inputs as known, delays as none" +
         (affine ? "" : "; linearised " + point));
  }

  void rows() {
    const LongRun run(model_, elsewhere_ ? near_start_of(model_) : start_of(model_));
    std::vector<Cells> table{{"without"}};
    for (const engine::StateModel& state : model_.states) {
      table.front().push_back(state.name + (state.unit.empty() ? "" : " (" + state.unit + ")"));
    }
    table.push_back(row(run, {}));
    for (const int one : all_) table.push_back(row(run, {one}));
    const bool pairs = all_.size() > 2 && all_.size() <= kMostForPairs;
    for (std::size_t i = 0; pairs && i < all_.size(); ++i) {
      for (std::size_t k = i + 1; k < all_.size(); ++k) table.push_back(row(run, {all_[i], all_[k]}));
    }
    print(table);
  }

  /// What is left out, and for each state its sd, or that it is lost.
  Cells row(const LongRun& run, const Channels& without) const {
    Channels with;
    std::set_difference(all_.begin(), all_.end(), without.begin(), without.end(), std::back_inserter(with));
    Cells names;
    for (const int one : without) names.push_back(model_.channels[static_cast<std::size_t>(one)].name);
    Cells out{joined(names, "none")};
    const Accuracy known = run.with(with);
    const std::vector<bool> shown = shown_by(with);
    for (std::size_t i = 0; i < known.sd.size(); ++i) {
      const std::string sd = digits(known.sd[i], 3);
      const std::string grows = known.growing[i] ? sd + " and growing" : sd;
      out.push_back(shown[i] ? grows : known.growing[i] ? "lost" : "lost, " + sd);
    }
    return out;
  }

  /// A state counts as shown if it is so at the start or near it.
  std::vector<bool> shown_by(const Channels& channels) const {
    std::vector<bool> shown = at_start_.shown_states(channels);
    const std::vector<bool> near = near_start_.shown_states(channels);
    for (std::size_t i = 0; i < shown.size(); ++i) shown[i] = shown[i] || near[i];
    return shown;
  }

  void print(const std::vector<Cells>& table) {
    std::vector<std::size_t> width(table.front().size(), 0);
    for (const Cells& cells : table) {
      for (std::size_t i = 0; i < cells.size(); ++i) width[i] = std::max(width[i], cells[i].size());
    }
    for (const Cells& cells : table) {
      std::string text = " ";
      for (std::size_t i = 0; i < cells.size(); ++i) {
        text += " " + cells[i];
        if (i + 1 < cells.size()) text += std::string(width[i] - cells[i].size() + 1, ' ');
      }
      line(text);
    }
  }

  const rig::Rig& rig_;
  const engine::Model& model_;
  Linearised at_start_;
  Linearised near_start_;
  Channels all_;
  bool elsewhere_ = false;
  std::string out_;
};

}  // namespace

std::string accuracy_text(const rig::Rig& rig) { return Table(rig).text(); }

}  // namespace steelyard::client
