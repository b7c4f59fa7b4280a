// SPDX-License-Identifier: Apache-2.0
// Opening of rig files and logs.
#include "cli/files.h"

#include <cerrno>
#include <cmath>
#include <cstdio>
#include <cstring>
#include <filesystem>
#include <fstream>
#include <optional>
#include <system_error>
#include <utility>

namespace steelyard::client {
namespace {

constexpr std::size_t kMostRigBytes = 1U << 20U;

std::optional<std::string> read_rig_text(const std::string& path) {
  std::ifstream file(path, std::ios::binary);
  if (!file) {
    complain(path + ": cannot be opened: " + std::strerror(errno));
    return std::nullopt;
  }
  std::string text(kMostRigBytes + 1, '\0');
  file.read(text.data(), static_cast<std::streamsize>(text.size()));
  if (file.bad()) {
    complain(path + ": cannot be read");
    return std::nullopt;
  }
  text.resize(static_cast<std::size_t>(file.gcount()));
  if (text.size() > kMostRigBytes) {
    complain(path + ": is larger than 1 MiB; a rig file must be smaller");
    return std::nullopt;
  }
  return text;
}

}  // namespace

void complain(const std::string& message) { std::fprintf(stderr, "steelyard: %s\n", message.c_str()); }

std::shared_ptr<const rig::Rig> load_rig_file(const std::string& path) {
  const std::optional<std::string> text = read_rig_text(path);
  if (!text) return nullptr;
  rig::Loaded loaded = rig::load(*text, path);
  for (const rig::Problem& problem : loaded.problems) std::fprintf(stderr, "%s\n", problem.text().c_str());
  if (!loaded.rig && loaded.problems.empty()) complain(path + ": is no rig");
  return std::move(loaded.rig);
}

bool open_log(const std::string& path, LogFile& log) {
  log.name = path == "-" ? "stdin" : path;
  std::error_code error;
  if (path != "-" && std::filesystem::is_directory(path, error)) {
    complain(path + ": is a directory; must be a file");
    return false;
  }
  if (!log.input.open(path)) {
    complain(path + ": cannot be opened: " + std::strerror(errno));
    return false;
  }
  // Only a regular file has a size; for the others there is no progress bar.
  const std::uintmax_t bytes = std::filesystem::file_size(path, error);
  if (!error) log.bytes = bytes;
  return true;
}

LogReader::Find names_of(std::shared_ptr<const rig::Rig> rig) {
  return [rig = std::move(rig)](std::string_view name) -> std::optional<Named> {
    const std::optional<rig::Signal> signal = rig->find(name);
    if (!signal) return std::nullopt;
    if (signal->is_input) return Named{*signal, 1};
    return Named{*signal, rig->model->channels[static_cast<std::size_t>(signal->index)].parts()};
  };
}

const std::string& signal_name(const rig::Rig& rig, const rig::Signal& signal) {
  const auto index = static_cast<std::size_t>(signal.index);
  return signal.is_input ? rig.model->inputs[index].name : rig.model->channels[index].name;
}

rig::Problem too_old(const rig::Rig& rig, const std::string& file, const LogRow& row,
                     const LogReading& reading, double behind_s) {
  return {file, row.line, row.time_column, signal_name(rig, reading.signal),
          "lies " + rig::duration_text(std::round(behind_s * 1e3) / 1e3) +
              " behind the newest row; must lie within the horizon, which is " +
              rig::duration_text(rig.horizon_s)};
}

}  // namespace steelyard::client
