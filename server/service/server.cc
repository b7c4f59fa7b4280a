// SPDX-License-Identifier: Apache-2.0
// Start and end of the service.
#include "service/server.h"

#include <grpcpp/ext/proto_server_reflection_plugin.h>
#include <grpcpp/health_check_service_interface.h>
#include <grpcpp/server_builder.h>
#include <spdlog/fmt/fmt.h>
#include <spdlog/spdlog.h>

#include <algorithm>
#include <charconv>
#include <exception>
#include <fstream>
#include <sstream>
#include <vector>

namespace steelyard::service {
namespace {

constexpr int kLargestMessageBytes = 4 << 20;
// Of one connection; further calls wait at the caller's side.
constexpr int kMostStreams = 4096;
// A source whose machine has lost power says nothing; ask it.
constexpr int kKeepaliveMs = 30'000;
constexpr int kKeepaliveTimeoutMs = 10'000;

void set_channel_arguments(grpc::ServerBuilder& builder) {
  builder.SetMaxReceiveMessageSize(kLargestMessageBytes);
  builder.AddChannelArgument(GRPC_ARG_ALLOW_REUSEPORT,
                             0);  // a second service on the port must fail, not share it
  builder.AddChannelArgument(GRPC_ARG_KEEPALIVE_TIME_MS, kKeepaliveMs);
  builder.AddChannelArgument(GRPC_ARG_KEEPALIVE_TIMEOUT_MS, kKeepaliveTimeoutMs);
  builder.AddChannelArgument(GRPC_ARG_HTTP2_MIN_RECV_PING_INTERVAL_WITHOUT_DATA_MS, kKeepaliveTimeoutMs);
  builder.AddChannelArgument(GRPC_ARG_KEEPALIVE_PERMIT_WITHOUT_CALLS, 1);
}

/// 127.0.0.0/8 in figures: "127.example" is a name that may lead anywhere.
bool is_ipv4_loopback(const std::string& host) {
  return host.starts_with("127.") && host.find_first_not_of("0123456789.") == std::string::npos;
}

/// False also for a directory, whose stream opens and then throws.
bool read_file(const std::filesystem::path& file, std::string& text) {
  std::error_code error;
  if (!std::filesystem::is_regular_file(file, error)) return false;
  std::ifstream in(file, std::ios::binary);
  std::ostringstream out;
  out << in.rdbuf();
  text = out.str();
  return in.is_open() && !in.bad();
}

}  // namespace

Server::Server(ServerOptions options, const Clock& clock)
    : options_(std::move(options)),
      workers_(clock, options_.threads),
      registry_(workers_, clock, options_.limits),
      service_(registry_, options_.limits) {}

Server::~Server() { shut_down(); }

std::string Server::start() {
  grpc::EnableDefaultHealthCheckService(true);
  grpc::reflection::InitProtoReflectionServerBuilderPlugin();
  grpc::ServerBuilder builder;
  set_channel_arguments(builder);
  builder.AddListeningPort(options_.listen, grpc::InsecureServerCredentials(), &port_);
  builder.RegisterService(&service_);
  server_ = builder.BuildAndStart();
  if (!server_ || port_ == 0) {
    server_.reset();
    return fmt::format("cannot listen at {}: the address is in use, or is none of this machine's",
                       options_.listen);
  }
  server_->GetHealthCheckService()->SetServingStatus(v1::Steelyard::service_full_name(), true);
  return {};
}

int Server::put_directory(const std::filesystem::path& directory) {
  std::vector<std::filesystem::path> files;
  std::error_code error;
  for (const auto& entry : std::filesystem::directory_iterator(directory, error)) {
    if (entry.path().extension() == ".yaml") files.push_back(entry.path());
  }
  if (error) spdlog::error("{}: {}", directory.string(), error.message());
  std::sort(files.begin(), files.end());
  int wrong = error ? 1 : 0;
  for (const auto& file : files) {
    try {
      put_file(file, wrong);
    } catch (const std::exception& failure) {
      spdlog::error("{}: {}", file.string(), failure.what());
      ++wrong;
    }
  }
  return wrong;
}

void Server::put_file(const std::filesystem::path& file, int& wrong) {
  std::string text;
  if (!read_file(file, text)) {
    spdlog::error("{}: cannot be read", file.string());
    ++wrong;
    return;
  }
  const PutResult result =
      registry_.put({std::move(text), file.string(), false, "steelyardd", "found at start"});
  if (result.status.ok()) return;
  ++wrong;
  if (result.problems.empty()) spdlog::error("{}: {}", file.string(), result.status.error_message());
  for (const rig::Problem& problem : result.problems) spdlog::error("{}", problem.text());
}

void Server::shut_down() {
  if (!server_) return;
  server_->GetHealthCheckService()->SetServingStatus(false);
  registry_.stop();
  server_->Shutdown(deadline_after(options_.limits.shutdown));
  server_.reset();
}

bool is_loopback(const std::string& address) {
  const std::string host = address.substr(0, address.rfind(':'));
  return host == "localhost" || host == "[::1]" || is_ipv4_loopback(host);
}

std::string check_address(const std::string& address) {
  const auto colon = address.rfind(':');
  const std::string host = address.substr(0, colon == std::string::npos ? 0 : colon);
  const bool bracketed = host.size() > 2 && host.front() == '[' && host.back() == ']';
  if (host.empty() || (!bracketed && host.find_first_of(":[]/") != std::string::npos)) {
    return fmt::format("is {}; must be HOST:PORT, e.g. 127.0.0.1:7411 or [::1]:7411", address);
  }
  const std::string text = address.substr(colon + 1);
  int port = -1;
  const auto [end, failure] = std::from_chars(text.data(), text.data() + text.size(), port);
  if (failure != std::errc() || end != text.data() + text.size() || port < 0 || port > 65'535) {
    return fmt::format("is {}; the port must be from 0 to 65535", address);
  }
  return {};
}

}  // namespace steelyard::service
