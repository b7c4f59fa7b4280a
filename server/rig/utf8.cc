// SPDX-License-Identifier: Apache-2.0
// UTF-8 by the table of RFC 3629 section 4: no overlong forms, no surrogates, nothing above U+10FFFF.
#include "rig/utf8.h"

#include <array>

namespace steelyard::rig {
namespace {

struct Row {
  unsigned char first_lo, first_hi;    // of the leading byte
  unsigned char second_lo, second_hi;  // of the byte after it; the further ones are 80..BF
  std::size_t length;
};
constexpr std::array<Row, 8> kRows{{{0xC2, 0xDF, 0x80, 0xBF, 2},
                                    {0xE0, 0xE0, 0xA0, 0xBF, 3},
                                    {0xE1, 0xEC, 0x80, 0xBF, 3},
                                    {0xED, 0xED, 0x80, 0x9F, 3},
                                    {0xEE, 0xEF, 0x80, 0xBF, 3},
                                    {0xF0, 0xF0, 0x90, 0xBF, 4},
                                    {0xF1, 0xF3, 0x80, 0xBF, 4},
                                    {0xF4, 0xF4, 0x80, 0x8F, 4}}};

bool within(char c, unsigned char lo, unsigned char hi) {
  const auto byte = static_cast<unsigned char>(c);
  return byte >= lo && byte <= hi;
}

bool matches(const Row& row, std::string_view text) {
  if (!within(text[0], row.first_lo, row.first_hi) || text.size() < row.length) return false;
  if (!within(text[1], row.second_lo, row.second_hi)) return false;
  for (std::size_t i = 2; i < row.length; ++i) {
    if (!within(text[i], 0x80, 0xBF)) return false;
  }
  return true;
}

// Length of the character that the (not empty) text begins with; 0: it may not stand in a text file.
std::size_t character_length(std::string_view text) {
  const char c = text[0];
  if (within(c, 0x20, 0x7E) || c == '\t' || c == '\n' || c == '\r') return 1;
  for (const Row& row : kRows) {
    if (matches(row, text)) return row.length;
  }
  return 0;
}

}  // namespace

std::optional<std::size_t> first_bad_byte(std::string_view text) {
  for (std::size_t i = 0; i < text.size();) {
    const std::size_t length = character_length(text.substr(i));
    if (length == 0) return i;
    i += length;
  }
  return std::nullopt;
}

}  // namespace steelyard::rig
