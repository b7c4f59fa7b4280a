// SPDX-License-Identifier: Apache-2.0
// A description as proto3 JSON of steelyard.v1.Rig: fields of type double take numbers, fields of type string
// take text, fields of type Value take either; so a key decides whether a plain number may stand as one.
#include <algorithm>
#include <array>
#include <exception>
#include <string>

#include "rig/document.h"
#include "rig/number.h"
#include "rig/rig.h"

namespace steelyard::rig {
namespace {

constexpr std::array<std::string_view, 17> kNumberKeys{
    "start",          "start_sd",    "needs",    "sd",         "times",       "share",
    "bias_sd",        "range",       "cutoff",   "modulo",     "strays",      "offset_size",
    "prior_readings", "correlation", "deadband", "resolution", "freeze_share"};

void append_escaped(char c, std::string& out) {
  constexpr std::string_view kDigits = "0123456789abcdef";
  const auto byte = static_cast<unsigned char>(c);
  if (c == '"' || c == '\\') {
    out += '\\';
    out += c;
  } else if (byte < 0x20U) {
    out += "\\u00";
    out += kDigits[byte >> 4U];
    out += kDigits[byte & 0xFU];
  } else {
    out += c;
  }
}

void append_text(std::string_view text, std::string& out) {
  out += '"';
  for (const char c : text) append_escaped(c, out);
  out += '"';
}

void append(const Node& node, bool as_number, std::string& out);

void append_list(const Node& node, bool as_number, std::string& out) {
  out += '[';
  for (const Node& item : node.items) {
    if (&item != node.items.data()) out += ',';
    append(item, as_number, out);
  }
  out += ']';
}

// `names`: the keys are names that the user chose, and say nothing of the type.
void append_map(const Node& node, bool names, bool as_number, std::string& out) {
  out += '{';
  for (const Node& item : node.items) {
    if (&item != node.items.data()) out += ',';
    append_text(item.key, out);
    out += ':';
    const bool is_number = std::find(kNumberKeys.begin(), kNumberKeys.end(), item.key) != kNumberKeys.end();
    append(item, names ? as_number : is_number, out);
  }
  out += '}';
}

void append_scalar(const Node& node, bool as_number, std::string& out) {
  const auto value = as_number && !node.quoted ? parse_number(node.text) : std::nullopt;
  if (value) {
    out += number_text(*value);
  } else {
    append_text(node.text, out);
  }
}

void append(const Node& node, bool as_number, std::string& out) {
  switch (node.kind) {
    case Node::Kind::kEmpty:
      out += "null";
      break;
    case Node::Kind::kScalar:
      append_scalar(node, as_number, out);
      break;
    case Node::Kind::kList:
      append_list(node, as_number, out);
      break;
    case Node::Kind::kMap:
      append_map(node, false, as_number, out);
      break;
  }
}

void append_part(const Node& part, std::string& out) {
  const bool numbers = part.key == "constants" || part.key == "unrest";
  const bool by_name = numbers || part.key == "motion";
  if (by_name && part.is_map()) {
    append_map(part, true, numbers, out);
  } else {
    append(part, false, out);
  }
}

std::string json_of(const Node& top) {
  std::string out = "{";
  for (const Node& part : top.items) {
    if (&part != top.items.data()) out += ',';
    append_text(part.key, out);
    out += ':';
    append_part(part, out);
  }
  return out + "}";
}

}  // namespace

std::string to_json(std::string_view text) {
  const std::string_view content = without_byte_order_mark(text);
  Problems ignored("", content);
  const std::optional<Node> top = parse_document(content, ignored);
  return top ? json_of(*top) : "{}";
}

}  // namespace steelyard::rig
