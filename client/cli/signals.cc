// SPDX-License-Identifier: Apache-2.0
// Signals become a flag.
#include "cli/signals.h"

#include <unistd.h>

#include <chrono>
#include <csignal>
#include <stop_token>
#include <utility>

namespace steelyard::client {
namespace {

volatile std::sig_atomic_t asked = 0;

void on_signal(int) {
  constexpr int kPatience = 3;
  asked = asked + 1;
  if (asked >= kPatience) _exit(1);
}

}  // namespace

void handle_signals() {
  struct sigaction action {};
  action.sa_handler = on_signal;
  sigemptyset(&action.sa_mask);
  sigaction(SIGINT, &action, nullptr);
  sigaction(SIGTERM, &action, nullptr);
  action.sa_handler = SIG_IGN;
  sigaction(SIGPIPE, &action, nullptr);
}

bool interrupted() { return asked != 0; }

InterruptWatch::InterruptWatch(std::function<void()> on_interrupt, std::function<bool()> idle)
    : thread_([on_interrupt = std::move(on_interrupt), idle = std::move(idle)](const std::stop_token& stop) {
        // A handler may not wake a thread safely, so the flag is looked at; a person does not notice 50 ms.
        while (!stop.stop_requested()) {
          if (interrupted() || (idle && idle())) return on_interrupt();
          std::this_thread::sleep_for(std::chrono::milliseconds(50));
        }
      }) {}

}  // namespace steelyard::client
