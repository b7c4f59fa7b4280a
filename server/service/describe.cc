// SPDX-License-Identifier: Apache-2.0
// Message, JSON and text of a rig; comparison part by part.
#include "service/describe.h"

#include <google/protobuf/io/coded_stream.h>
#include <google/protobuf/io/zero_copy_stream_impl_lite.h>
#include <google/protobuf/util/json_util.h>
#include <google/protobuf/util/message_differencer.h>
#include <google/protobuf/util/type_resolver.h>
#include <google/protobuf/util/type_resolver_util.h>

#include <cctype>
#include <memory>
#include <set>

#include "rig/rig.h"

namespace steelyard::service {
namespace {

namespace pb = google::protobuf;

bool equal(const pb::Message& a, const pb::Message& b) { return pb::util::MessageDifferencer::Equals(a, b); }

/// Protobuf's own printer goes through the maps in an order of chance; serialising first with sorted keys
/// does not.
std::string sorted_bytes(const pb::Message& message) {
  std::string bytes;
  pb::io::StringOutputStream stream(&bytes);
  pb::io::CodedOutputStream coded(&stream);
  coded.SetSerializationDeterministic(true);
  message.SerializeToCodedStream(&coded);
  coded.Trim();
  return bytes;
}

v1::Rig without_labels(v1::Rig rig) {
  for (auto& [name, channel] : *rig.mutable_channels()) {
    channel.clear_tag();
    channel.clear_where();
    channel.clear_serial();
    channel.clear_note();
  }
  return rig;
}

bool is_word(char c) { return std::isalnum(static_cast<unsigned char>(c)) != 0 || c == '_'; }

/// Whether a formula mentions one of the names as a whole word.
bool mentions(const std::string& formula, const std::set<std::string>& names) {
  for (std::size_t i = 0; i < formula.size();) {
    std::size_t end = i;
    while (end < formula.size() && is_word(formula[end])) ++end;
    if (end > i && names.contains(formula.substr(i, end - i))) return true;
    i = end > i ? end : i + 1;
  }
  return false;
}

bool mentions(const pb::Value& value, const std::set<std::string>& names) {
  if (value.has_string_value()) return mentions(value.string_value(), names);
  for (const pb::Value& part : value.list_value().values()) {
    if (mentions(part, names)) return true;
  }
  return false;
}

std::set<std::string> changed_constants(const v1::Rig& before, const v1::Rig& after) {
  std::set<std::string> changed;
  for (const auto& [name, value] : after.constants()) {
    const auto old = before.constants().find(name);
    if (old == before.constants().end() || old->second != value) changed.insert(name);
  }
  for (const auto& [name, value] : before.constants()) {
    if (!after.constants().contains(name)) changed.insert(name);
  }
  return changed;
}

/// Both have no entry of this name, or an equal one.
template <typename Map>
bool same_message(const Map& before, const Map& after, const std::string& name) {
  const auto a = before.find(name);
  const auto b = after.find(name);
  if (a == before.end() || b == after.end()) return a == before.end() && b == after.end();
  return equal(a->second, b->second);
}

bool same_unrest(const v1::Rig& before, const v1::Rig& after, const std::string& name) {
  const auto a = before.unrest().find(name);
  const auto b = after.unrest().find(name);
  const double left = a == before.unrest().end() ? 0.0 : a->second;
  const double right = b == after.unrest().end() ? 0.0 : b->second;
  return left == right;
}

/// Sorts the names of one kind of part into same, anew and gone.
template <typename Map, typename Same>
void sort_parts(const std::string& kind, const Map& before, const Map& after, const Same& same,
                v1::RigChange& change) {
  const std::map<std::string, int> sorted = [&] {
    std::map<std::string, int> names;
    for (const auto& [name, part] : after) names[name] |= 1;
    for (const auto& [name, part] : before) names[name] |= 2;
    return names;
  }();
  for (const auto& [name, where] : sorted) {
    const std::string path = kind + "." + name;
    if (where == 2) {
      change.add_gone(path);
    } else if (where == 3 && same(name)) {
      change.add_same(path);
    } else {
      change.add_anew(path);
    }
  }
}

}  // namespace

std::optional<std::string> to_text(const v1::Rig& rig) {
  const std::unique_ptr<pb::util::TypeResolver> resolver(pb::util::NewTypeResolverForDescriptorPool(
      "type.googleapis.com", pb::DescriptorPool::generated_pool()));
  pb::util::JsonPrintOptions options;
  options.add_whitespace = true;
  options.preserve_proto_field_names = true;
  std::string text;
  const auto status = pb::util::BinaryToJsonString(resolver.get(), "type.googleapis.com/" + rig.GetTypeName(),
                                                   sorted_bytes(rig), &text, options);
  if (!status.ok()) return std::nullopt;
  return text;
}

std::optional<v1::Rig> to_message(const std::string& text) {
  pb::util::JsonParseOptions options;
  options.ignore_unknown_fields = true;
  v1::Rig rig;
  if (!pb::util::JsonStringToMessage(rig::to_json(text), &rig, options).ok()) return std::nullopt;
  return rig;
}

v1::RigChange compare(const v1::Rig& before_text, const v1::Rig& after_text) {
  const v1::Rig before = without_labels(before_text);
  const v1::Rig after = without_labels(after_text);
  const auto constants = changed_constants(before, after);
  v1::RigChange change;
  const bool equal_rigs = equal(before, after);
  change.set_kind(equal_rigs ? v1::RigChange::REWORDED : v1::RigChange::CHANGED);
  change.set_restarted(!equal_rigs);
  sort_parts(
      "states", before.states(), after.states(),
      [&](const std::string& name) {
        const auto motion = after.motion().find(name);
        return same_message(before.states(), after.states(), name) && same_unrest(before, after, name) &&
               same_message(before.motion(), after.motion(), name) &&
               (motion == after.motion().end() || !mentions(motion->second, constants));
      },
      change);
  // The response time scales the defaults of every channel.
  const bool same_scale = before.response() == after.response();
  sort_parts(
      "channels", before.channels(), after.channels(),
      [&](const std::string& name) {
        const v1::Channel& channel = after.channels().at(name);
        return same_scale && same_message(before.channels(), after.channels(), name) &&
               !mentions(channel.reads(), constants) && !mentions(channel.sd(), constants);
      },
      change);
  return change;
}

v1::RigChange all_new(const v1::Rig& rig) {
  v1::RigChange change;
  change.set_kind(v1::RigChange::NEW);
  const v1::Rig nothing;
  const auto never = [](const std::string&) { return false; };
  sort_parts("states", nothing.states(), rig.states(), never, change);
  sort_parts("channels", nothing.channels(), rig.channels(), never, change);
  return change;
}

}  // namespace steelyard::service
