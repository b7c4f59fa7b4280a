// SPDX-License-Identifier: Apache-2.0
// The service as a whole: workers, rigs, the gRPC server with health and reflection, start and orderly end.
//
//   Server server(options, clock);
//   if (auto problem = server.start(); !problem.empty()) ...   // e.g. the port is in use
//   server.put_directory("rigs");
//   ...
//   server.shut_down();
#pragma once

#include <grpcpp/server.h>

#include <cstddef>
#include <filesystem>
#include <memory>
#include <string>

#include "service/clock.h"
#include "service/limits.h"
#include "service/registry.h"
#include "service/service.h"
#include "service/worker.h"

namespace steelyard::service {

struct ServerOptions {
  std::string listen = "127.0.0.1:7411";  ///< HOST:PORT; port 0: any that is free
  std::size_t threads = 1;                ///< that run rigs
  Limits limits;
};

/// start and shut_down by one thread.
class Server {
 public:
  /// `clock` must outlive the server.
  Server(ServerOptions options, const Clock& clock);
  ~Server();
  Server(const Server&) = delete;
  Server& operator=(const Server&) = delete;

  /// Empty: it listens. Else why not.
  [[nodiscard]] std::string start();
  /// The port that is listened at.
  [[nodiscard]] int port() const { return port_; }

  /// Puts every *.yaml of a directory, in the order of their names. A wrong file is logged with all its
  /// problems and stops no other. Returns how many were wrong.
  int put_directory(const std::filesystem::path& directory);

  /// Takes no more, runs what is in the mailboxes, ends all streams with UNAVAILABLE; what is not done within
  /// Limits::shutdown is cut off.
  void shut_down();

  [[nodiscard]] Registry& registry() { return registry_; }

 private:
  void put_file(const std::filesystem::path& file, int& wrong);

  ServerOptions options_;
  WorkerPool workers_;
  Registry registry_;
  Service service_;
  std::unique_ptr<grpc::Server> server_;
  int port_ = 0;
};

/// Whether HOST of HOST:PORT can be reached from this machine alone: 127.0.0.0/8, ::1 or localhost.
[[nodiscard]] bool is_loopback(const std::string& address);
/// Empty if it is of the form HOST:PORT or [HOST]:PORT with a port of 0 to 65535; else what is wrong.
[[nodiscard]] std::string check_address(const std::string& address);

}  // namespace steelyard::service
