// SPDX-License-Identifier: Apache-2.0
#include "cli/episode_rows.h"

#include <algorithm>

#include "lib/log/text.h"
#include "timeline/kinds.h"

namespace steelyard::client {
namespace {

/// As RFC 4180 wants it: units, which stand in a rival's words, may be any text.
std::string cell(const std::string& text) {
  if (text.find_first_of(",\"\r\n") == std::string::npos) return text;
  std::string out = "\"";
  for (const char c : text) out += c == '"' ? "\"\"" : std::string(1, c);
  return out + "\"";
}

void append_size(std::string& out, const std::vector<timeline::Size>& sizes, std::size_t part) {
  if (part >= sizes.size()) {
    out += ",,,";
    return;
  }
  for (const double number : {sizes[part].size, sizes[part].lo, sizes[part].hi}) {
    out += ',';
    append_number(out, number);
  }
}

}  // namespace

void append_episode_header(std::string& out) {
  out += "id,channel,from,to,kind,size,size.lo,size.hi,probability,rival,rival.probability,cause\n";
}

void append_episode_rows(std::string& out, const Names& names, int parts, const timeline::Episode& episode,
                         TimeStyle style) {
  const timeline::Stretch& stretch = episode.stretch;
  const std::string& name = names.channels[static_cast<std::size_t>(stretch.channel)];
  const std::size_t rows = parts > 1 ? std::max<std::size_t>(1, stretch.sizes.size()) : 1;
  for (std::size_t part = 0; part < rows; ++part) {
    out += std::to_string(episode.id) + "," + name;
    if (rows > 1) out += "." + std::to_string(part + 1);
    out += "," + time_text(stretch.from_ns, style) + ",";
    if (!stretch.open) out += time_text(stretch.to_ns, style);
    out += std::string(",") + timeline::kind_name(stretch.kind);
    append_size(out, stretch.sizes, part);
    out += ',';
    append_number(out, stretch.then);
    out += "," + cell(stretch.rival.words) + ",";
    append_number(out, stretch.rival.probability);
    out += "," + std::to_string(episode.cause) + "\n";
  }
}

}  // namespace steelyard::client
