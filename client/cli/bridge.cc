// SPDX-License-Identifier: Apache-2.0
// From the wire's messages to the command's own structures. A message may lack anything.
#include "cli/bridge.h"

#include <algorithm>

#include "cli/commands.h"
#include "cli/files.h"

namespace steelyard::client {
namespace {

engine::Interval interval_of(const v1::Interval& wire) { return {wire.low(), wire.high()}; }

engine::StateEstimate state_of(const v1::StateEstimate& wire) {
  engine::StateEstimate state;
  state.mean = wire.mean();
  state.sd = wire.sd();
  state.interval90 = interval_of(wire.interval90());
  state.two_peaked = wire.two_peaked();
  state.within_needs = wire.within_needs();
  return state;
}

engine::ChannelEstimate channel_of(const v1::ChannelEstimate& wire) {
  engine::ChannelEstimate channel;
  channel.trust = wire.trust();
  const auto count =
      std::min<std::size_t>(static_cast<std::size_t>(wire.probability_size()), engine::kConditions);
  for (std::size_t i = 0; i < count; ++i) channel.probability[i] = wire.probability(static_cast<int>(i));
  channel.silent = wire.silent();
  channel.noise_sd = wire.noise_sd();
  channel.noise_sd90 = interval_of(wire.noise_sd90());
  channel.offset = wire.offset();
  channel.offset_sd = wire.offset_sd();
  channel.influence = wire.influence();
  channel.age_s = wire.age_s();
  channel.out_of_range = wire.out_of_range();
  channel.unsound_since_ns = wire.since_ns();
  // Never more than a channel can have.
  for (int i = 0; i < wire.others_size() && i < engine::kMaxParts - 1; ++i) {
    const v1::PartEstimate& part = wire.others(i);
    channel.others.push_back(
        {part.noise_sd(), interval_of(part.noise_sd90()), part.offset(), part.offset_sd()});
  }
  return channel;
}

engine::Explanation explanation_of(const v1::Explanation& wire, const std::vector<std::string>& names) {
  engine::Explanation out;
  out.probability = wire.probability();
  for (const v1::Finding& one : wire.findings()) {
    const auto name = std::find(names.begin(), names.end(), one.channel());
    if (name == names.end()) continue;
    const auto channel = static_cast<int>(name - names.begin());
    const int part = one.part() > 0 && one.part() <= engine::kMaxParts ? static_cast<int>(one.part()) - 1 : 0;
    out.findings.push_back({channel, static_cast<engine::Condition>(one.condition()), one.offset(),
                            one.offset_sd(), part, one.since_ns()});
  }
  return out;
}

std::string quality_of(v1::EstimateQuality quality) {
  switch (quality) {
    case v1::ESTIMATE_GOOD:
      return "good";
    case v1::ESTIMATE_UNCERTAIN:
      return "uncertain";
    case v1::ESTIMATE_BAD:
      return "bad";
    default:
      return "unknown";
  }
}

}  // namespace

Picture picture_of(const v1::Moment& moment) {
  Picture picture;
  picture.quality = quality_of(moment.quality());
  picture.clock_ns = moment.clock_ns();
  picture.behind_s = static_cast<double>(moment.behind_ns()) * 1e-9;
  picture.started = moment.started();
  picture.estimate.time_ns = moment.time_ns();
  for (const v1::StateEstimate& state : moment.states()) {
    picture.names.states.push_back(state.name());
    picture.state_units.push_back(state.unit());
    picture.estimate.states.push_back(state_of(state));
  }
  for (const v1::ChannelEstimate& channel : moment.channels()) {
    picture.names.channels.push_back(channel.name());
    picture.names.units.push_back(channel.unit());
    picture.words.push_back(channel.words());
    picture.estimate.channels.push_back(channel_of(channel));
  }
  // The service lists at most three.
  for (int i = 0; i < std::min(moment.explanations_size(), 3); ++i) {
    picture.estimate.explanations.push_back(explanation_of(moment.explanations(i), picture.names.channels));
    picture.explanations.push_back(moment.explanations(i).words());
  }
  return picture;
}

int fail_with(const std::string& what, const grpc::Status& status) {
  complain(what + ": " + status.error_message());
  switch (status.error_code()) {
    case grpc::StatusCode::INVALID_ARGUMENT:
    case grpc::StatusCode::NOT_FOUND:
    case grpc::StatusCode::FAILED_PRECONDITION:
    case grpc::StatusCode::OUT_OF_RANGE:
      return kWrongInput;
    default:
      return kFailed;
  }
}

std::shared_ptr<const rig::Rig> fetch_rig(Client& client, const std::string& name, grpc::Status& status) {
  v1::GetRigResponse answer;
  status = client.get_rig(name, answer);
  if (!status.ok()) return nullptr;
  rig::Loaded loaded = rig::load(answer.file(), name);
  if (loaded.rig) return loaded.rig;
  const std::string why = loaded.problems.empty() ? "no reason given" : loaded.problems.front().text();
  status =
      grpc::Status(grpc::StatusCode::INTERNAL, "the service's rig cannot be used by this version: " + why);
  return nullptr;
}

}  // namespace steelyard::client
