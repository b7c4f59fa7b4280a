// SPDX-License-Identifier: Apache-2.0
// steelyardd: reads the options, starts the service, waits for SIGTERM or SIGINT, ends it in order.
// Exit 0: ended as asked. 1: could not start or go on. 2: wrong usage.
#include <signal.h>
#include <spdlog/spdlog.h>

#include <CLI/CLI.hpp>
#include <algorithm>
#include <cstdio>
#include <filesystem>
#include <fstream>
#include <string>
#include <thread>

#include "service/log.h"
#include "service/server.h"

namespace {

namespace service = steelyard::service;

constexpr int kFailed = 1;
constexpr int kWrongUsage = 2;

struct Options {
  service::ServerOptions server;
  std::filesystem::path data;
  std::filesystem::path rigs;
  std::filesystem::path port_file;
  std::string log = "text";
  bool beyond_loopback = false;
};

void declare(CLI::App& app, Options& options) {
  app.add_option("--data", options.data,
                 "Directory for what must outlive the service; created. Nothing is kept in it yet")
      ->required()
      ->type_name("DIR");
  app.add_option("--listen", options.server.listen, "Where to listen; port 0 takes any that is free")
      ->capture_default_str()
      ->type_name("HOST:PORT");
  app.add_flag(
      "--listen-beyond-loopback", options.beyond_loopback,
      "Allow --listen to be reached from other machines, by anybody: there is no encryption and there are no "
      "rights yet");
  app.add_option("--rigs", options.rigs, "Put every *.yaml of this directory at start")->type_name("DIR");
  app.add_option("--threads", options.server.threads, "Threads that run rigs")
      ->capture_default_str()
      ->check(CLI::Range(1, 1024));
  app.add_option("--mailbox", options.server.limits.mailbox_readings,
                 "Readings that wait for a rig before its sources are held up")
      ->capture_default_str()
      ->check(CLI::Range(1, 10'000'000));
  app.add_option("--max-rigs", options.server.limits.rigs, "Rigs")
      ->capture_default_str()
      ->check(CLI::Range(1, 1'000'000));
  app.add_option("--port-file", options.port_file, "Write the port to this file once it is listened at")
      ->type_name("FILE");
  app.add_option("--log", options.log, "Form of the log on stderr")
      ->capture_default_str()
      ->check(CLI::IsMember({"text", "json"}));
}

int wrong_usage(const std::string& message) {
  std::fprintf(stderr, "steelyardd: %s\n", message.c_str());
  return kWrongUsage;
}

/// 0 if the options fit together.
int check(const Options& options) {
  if (const auto problem = service::check_address(options.server.listen); !problem.empty()) {
    return wrong_usage("--listen: " + problem);
  }
  if (!options.beyond_loopback && !service::is_loopback(options.server.listen)) {
    return wrong_usage(
        "--listen: is " + options.server.listen +
        "; listening beyond this machine needs --listen-beyond-loopback, as there is no encryption and "
        "there are no rights yet");
  }
  std::error_code error;
  if (!options.rigs.empty() && !std::filesystem::is_directory(options.rigs, error)) {
    return wrong_usage("--rigs: is " + options.rigs.string() + "; there is no such directory");
  }
  std::filesystem::create_directories(options.data, error);
  if (error)
    return wrong_usage("--data: is " + options.data.string() + "; cannot be created: " + error.message());
  return 0;
}

/// Whole or not at all: a reader never sees half a number.
bool write_port(const std::filesystem::path& file, int port) {
  std::filesystem::path part = file;
  part += ".part";
  std::ofstream out(part);
  out << port << '\n';
  out.close();
  std::error_code error;
  if (out) std::filesystem::rename(part, file, error);
  if (out && !error) return true;
  spdlog::error("--port-file: {} cannot be written", file.string());
  return false;
}

sigset_t block_signals() {
  sigset_t signals;
  sigemptyset(&signals);
  sigaddset(&signals, SIGTERM);
  sigaddset(&signals, SIGINT);
  pthread_sigmask(SIG_BLOCK, &signals, nullptr);  // in the threads to come, too
  signal(SIGPIPE, SIG_IGN);
  return signals;
}

int run(const Options& options) {
  const sigset_t signals = block_signals();
  service::set_up_log(options.log == "json" ? service::LogForm::kJson : service::LogForm::kText);
  const service::SystemClock clock;
  service::Server server(options.server, clock);
  if (!options.rigs.empty()) server.put_directory(options.rigs);
  if (const auto problem = server.start(); !problem.empty()) {
    spdlog::error("{}", problem);
    return kFailed;
  }
  spdlog::info("listening at {}, port {}; nothing is kept on disk yet", options.server.listen, server.port());
  if (!options.port_file.empty() && !write_port(options.port_file, server.port())) return kFailed;
  int received = 0;
  sigwait(&signals, &received);
  spdlog::info("{}: ending", received == SIGTERM ? "SIGTERM" : "SIGINT");
  server.shut_down();
  spdlog::info("ended");
  return 0;
}

}  // namespace

int main(int argc, char** argv) {
  Options options;
  options.server.threads = std::clamp(std::thread::hardware_concurrency(), 1U, 64U);
  CLI::App app("Runs rigs: fuses what their sensors say, and says how far each can be trusted.",
               "steelyardd");
  declare(app, options);
  try {
    app.parse(argc, argv);
  } catch (const CLI::ParseError& error) {
    return app.exit(error) == 0 ? 0 : kWrongUsage;
  }
  if (const int code = check(options); code != 0) return code;
  try {
    return run(options);
  } catch (const std::exception& error) {
    std::fprintf(stderr, "steelyardd: %s\n", error.what());
    return kFailed;
  }
}
