// SPDX-License-Identifier: Apache-2.0
#include "judges/judge.h"

#include <cstdarg>
#include <cstdio>
#include <cstdlib>
#include <cstring>

namespace steelyard::judges {
namespace {

[[noreturn]] void wrong_usage(const std::string& why) {
  std::fprintf(stderr, "%s\n", why.c_str());
  std::exit(2);
}

}  // namespace

Numbers::Numbers(int argc, char** argv, std::map<std::string, double> defaults)
    : values_(std::move(defaults)) {
  for (int i = 1; i < argc; i += 2) {
    const std::string name = std::strncmp(argv[i], "--", 2) == 0 ? argv[i] + 2 : argv[i];
    const auto found = values_.find(name);
    if (found == values_.end()) {
      std::string known;
      for (const auto& [key, value] : values_) known += " --" + key + format(" %g", value);
      wrong_usage(std::string(argv[i]) + ": is not a known option; known, with defaults:" + known);
    }
    char* end = nullptr;
    found->second = i + 1 < argc ? std::strtod(argv[i + 1], &end) : 0.0;
    if (!end || end == argv[i + 1] || *end != '\0')
      wrong_usage(std::string(argv[i]) + ": must be followed by a number");
  }
}

void Bounds::require(bool holds, const std::string& what, bool known) {
  if (holds) return;
  const bool forgiven = known && forgive_known_;
  ++(forgiven ? forgiven_ : broken_);
  std::printf("%s: %s\n", forgiven ? "known not to hold" : "BROKEN", what.c_str());
}

int Bounds::exit_code() const {
  if (forgiven_ > 0) std::printf("%d bounds do not hold, as known\n", forgiven_);
  if (broken_ > 0) std::printf("%d bounds broken\n", broken_);
  return broken_ > 0 ? 1 : 0;
}

std::string format(const char* pattern, ...) {
  std::va_list arguments;
  va_start(arguments, pattern);
  char text[512];
  std::vsnprintf(text, sizeof text, pattern, arguments);
  va_end(arguments);
  return text;
}

}  // namespace steelyard::judges
