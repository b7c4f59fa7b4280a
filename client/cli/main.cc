// SPDX-License-Identifier: Apache-2.0
// steelyard: the command. Data goes to stdout, messages to stderr; exit 0 done, 1 failed, 2 wrong usage or
// input.
#include <cstdio>
#include <exception>
#include <new>

#include "cli/commands.h"
#include "cli/signals.h"

namespace {

constexpr const char* kAbout =
    "Weighs the readings of overlapping sensors: one estimate with honest error bars, and how far each "
    "channel\n"
    "can be trusted.";
constexpr const char* kFooter =
    "Exit codes: 0 done, 1 failed, 2 wrong usage or input. Messages go to stderr, data to stdout.\n"
    "Steelyard advises. It is no safety function: trips and interlocks must not depend on it.";

int parse_and_run(int argc, char** argv) {
  CLI::App app{kAbout, "steelyard"};
  app.set_version_flag("--version", "steelyard 0.1.0");
  app.require_subcommand(1);
  app.footer(kFooter);
  steelyard::client::Run run;
  steelyard::client::add_check(app, run);
  steelyard::client::add_replay(app, run);
  steelyard::client::add_feed(app, run);
  steelyard::client::add_watch(app, run);
  try {
    app.parse(argc, argv);
  } catch (const CLI::ParseError& error) {
    // CLI11 has codes of its own; ours are 0 for help and 2 for wrong usage.
    return app.exit(error) == 0 ? steelyard::client::kDone : steelyard::client::kWrongInput;
  }
  return run ? run() : steelyard::client::kWrongInput;
}

}  // namespace

int main(int argc, char** argv) {
  steelyard::client::handle_signals();
  try {
    return parse_and_run(argc, argv);
  } catch (const std::bad_alloc&) {
    std::fputs("steelyard: out of memory\n", stderr);
  } catch (const std::exception& error) {
    std::fprintf(stderr, "steelyard: %s\n", error.what());
  }
  return steelyard::client::kFailed;
}
