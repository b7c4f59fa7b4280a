// SPDX-License-Identifier: Apache-2.0
// Field by field from the engine's estimate to the wire.
#include "service/convert.h"

#include <algorithm>
#include <cmath>

#include "timeline/words.h"

namespace steelyard::service {
namespace {

constexpr double kGoodWithin = 0.95;
constexpr double kBadWithin = 0.5;

void set_interval(const engine::Interval& from, v1::Interval& to) {
  to.set_low(from.lo);
  to.set_high(from.hi);
}

void add_states(const Picture& picture, v1::Moment& message) {
  const auto& model = *picture.rig->model;
  for (std::size_t i = 0; i < picture.estimate.states.size(); ++i) {
    const engine::StateEstimate& from = picture.estimate.states[i];
    v1::StateEstimate& to = *message.add_states();
    to.set_name(model.states[i].name);
    to.set_unit(model.states[i].unit);
    to.set_mean(from.mean);
    to.set_sd(from.sd);
    set_interval(from.interval90, *to.mutable_interval90());
    to.set_two_peaked(from.two_peaked);
    to.set_within_needs(from.within_needs);
  }
}

void add_inputs(const Picture& picture, v1::Moment& message) {
  const auto& model = *picture.rig->model;
  for (std::size_t i = 0; i < picture.estimate.inputs.size(); ++i) {
    v1::InputEstimate& to = *message.add_inputs();
    to.set_name(model.inputs[i].name);
    to.set_unit(model.inputs[i].unit);
    to.set_value(picture.estimate.inputs[i]);
    to.set_sd(picture.estimate.inputs_sd[i]);
  }
}

void add_parts(const engine::ChannelEstimate& from, const engine::ChannelModel& model,
               v1::ChannelEstimate& to) {
  for (std::size_t i = 0; i < from.others.size(); ++i) {
    const engine::PartEstimate& part = from.others[i];
    v1::PartEstimate& other = *to.add_others();
    other.set_unit(model.part(static_cast<int>(i) + 1).unit);
    other.set_noise_sd(part.noise_sd);
    set_interval(part.noise_sd90, *other.mutable_noise_sd90());
    other.set_offset(part.offset);
    other.set_offset_sd(part.offset_sd);
  }
}

void fill_channel(const engine::ChannelEstimate& from, v1::ChannelEstimate& to) {
  to.set_trust(from.trust);
  for (const double probability : from.probability) to.add_probability(probability);
  to.set_silent(from.silent);
  to.set_noise_sd(from.noise_sd);
  set_interval(from.noise_sd90, *to.mutable_noise_sd90());
  to.set_offset(from.offset);
  to.set_offset_sd(from.offset_sd);
  to.set_influence(from.influence);
  to.set_age_s(from.age_s);
  to.set_out_of_range(from.out_of_range);
  to.set_status(timeline::ne107_status(from));
}

void add_channels(const Picture& picture, v1::Moment& message) {
  const auto& model = *picture.rig->model;
  for (std::size_t i = 0; i < picture.estimate.channels.size(); ++i) {
    v1::ChannelEstimate& to = *message.add_channels();
    to.set_name(model.channels[i].name);
    to.set_unit(model.channels[i].unit);
    fill_channel(picture.estimate.channels[i], to);
    add_parts(picture.estimate.channels[i], model.channels[i], to);
    const engine::TimeNs since_ns = i < picture.since_ns.size() ? picture.since_ns[i] : 0;
    to.set_since_ns(timeline::since_of(picture.estimate.channels[i], picture.estimate, since_ns));
    to.set_words(timeline::channel_words(*picture.rig, static_cast<int>(i), picture.estimate, since_ns));
  }
}

void add_explanations(const Picture& picture, v1::Moment& message) {
  const auto& model = *picture.rig->model;
  for (const engine::Explanation& from : picture.estimate.explanations) {
    v1::Explanation& to = *message.add_explanations();
    to.set_probability(from.probability);
    to.set_words(timeline::explanation_words(*picture.rig, from, picture.estimate.time_ns));
    for (const engine::Finding& finding : from.findings) {
      v1::Finding& part = *to.add_findings();
      part.set_channel(model.channels[static_cast<std::size_t>(finding.channel)].name);
      part.set_condition(static_cast<v1::Condition>(finding.condition));
      part.set_offset(finding.offset);
      part.set_offset_sd(finding.offset_sd);
      part.set_since_ns(finding.since_ns);
      if (model.channels[static_cast<std::size_t>(finding.channel)].parts() > 1) {
        part.set_part(static_cast<std::uint32_t>(finding.part) + 1);
      }
    }
  }
}

}  // namespace

v1::EstimateQuality quality_of(const Picture& picture) {
  if (!picture.started || picture.at_horizon) return v1::ESTIMATE_BAD;
  double least = 1.0;
  for (const engine::StateEstimate& state : picture.estimate.states) {
    if (!std::isfinite(state.mean) || !std::isfinite(state.sd) || std::isnan(state.within_needs)) {
      return v1::ESTIMATE_BAD;
    }
    least = std::min(least, state.within_needs);
  }
  if (least >= kGoodWithin) return v1::ESTIMATE_GOOD;
  return least >= kBadWithin ? v1::ESTIMATE_UNCERTAIN : v1::ESTIMATE_BAD;
}

void fill_moment(const Picture& picture, v1::Moment& message) {
  message.set_rig(picture.rig->name);
  message.set_revision(picture.revision);
  message.set_time_ns(picture.estimate.time_ns);
  message.set_clock_ns(picture.clock_ns);
  message.set_behind_ns(picture.behind_ns);
  message.set_started(picture.started);
  message.set_quality(quality_of(picture));
  add_states(picture, message);
  add_inputs(picture, message);
  add_channels(picture, message);
  add_explanations(picture, message);
  for (const double probability : picture.estimate.mode) message.add_mode(probability);
}

}  // namespace steelyard::service
