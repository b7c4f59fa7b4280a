// SPDX-License-Identifier: Apache-2.0
// Batches in columns.
#include "cli/batches.h"

#include <array>
#include <charconv>
#include <filesystem>
#include <fstream>
#include <string_view>
#include <system_error>
#include <utility>

namespace steelyard::client {
namespace {

/// FNV-1a (Fowler, Noll, Vo): it tells logs of one name apart, nothing more.
std::uint64_t hash_of(std::string_view text) {
  std::uint64_t hash = 14695981039346656037U;
  for (const char c : text) hash = (hash ^ static_cast<unsigned char>(c)) * 1099511628211U;
  return hash;
}

std::string hex(std::uint64_t number) {
  std::array<char, 16> digits{};
  const auto [end, error] = std::to_chars(digits.data(), digits.data() + digits.size(), number, 16);
  return error == std::errc() ? std::string(digits.data(), end) : "0";
}

bool continues_character(char c) { return (static_cast<unsigned char>(c) & 0xC0U) == 0x80U; }

}  // namespace

std::string default_source(const std::string& log) {
  std::ifstream file(log, std::ios::binary);
  std::string begin(4096, '\0');
  file.read(begin.data(), static_cast<std::streamsize>(begin.size()));
  begin.resize(static_cast<std::size_t>(file.gcount()));
  const std::string hash = hex(hash_of(begin));
  std::string name = std::filesystem::path(log).filename().string();
  const std::size_t most = kMostSourceBytes - hash.size() - 1;
  if (name.size() > most) name.erase(0, name.size() - most);
  while (!name.empty() && continues_character(name.front())) name.erase(0, 1);
  return name + "-" + hash;
}

std::vector<std::string> channel_table(const engine::Model& model) {
  std::vector<std::string> names;
  for (const engine::InputModel& input : model.inputs) names.push_back(input.name);
  for (const engine::ChannelModel& channel : model.channels) names.push_back(channel.name);
  return names;
}

std::uint32_t BatchMaker::number_of(const rig::Signal& signal) const {
  const auto index = static_cast<std::size_t>(signal.index);
  return static_cast<std::uint32_t>(signal.is_input ? index : inputs_ + index);
}

void BatchMaker::add(const timeline::Reading& reading) {
  if (rows() == 0) {
    batch_.set_first_sequence(reading.sequence);
    batch_.set_base_time_ns(reading.time_ns);
    last_ns_ = reading.time_ns;
  }
  if (reading.quality != engine::Quality::kGood) {
    batch_.add_quality_row(static_cast<std::uint32_t>(rows()));
    batch_.add_quality(static_cast<v1::ReadingQuality>(reading.quality));
  }
  batch_.add_time_step_ns(reading.time_ns - last_ns_);
  batch_.add_channel(number_of(reading.signal));
  batch_.add_value(reading.values.first());
  for (const double more : reading.values.all().subspan(1)) batch_.add_more_values(more);
  last_ns_ = reading.time_ns;
}

bool BatchMaker::full_before(const timeline::Reading& reading, bool one_time_each) const {
  if (rows() == 0) return false;
  const bool new_time = reading.time_ns != last_ns_;
  if (rows() >= kMostRows || values() + reading.values.size() > kMostValues) return true;
  return new_time && (one_time_each || rows() >= kUsualRows);
}

v1::Batch BatchMaker::take() { return std::exchange(batch_, {}); }

}  // namespace steelyard::client
