// SPDX-License-Identifier: Apache-2.0
// The client library against a service in the test's process, which is stopped and started meanwhile.
#include "lib/client.h"

#include <grpcpp/health_check_service_interface.h>
#include <grpcpp/server_builder.h>

#include <chrono>
#include <thread>

#include "fixture.h"

namespace steelyard::client {
namespace {

using grpc::StatusCode;
using service::is_status;
using service::kSecond;
using service::kStart;
using service::trolley;
using std::chrono::milliseconds;

class ClientTest : public service::ServiceTest {
 protected:
  [[nodiscard]] std::string address() const { return "127.0.0.1:" + std::to_string(server_->port()); }
  [[nodiscard]] static v1::Batch rows(std::uint64_t first, int count) {
    return service::batch({.first_sequence = first,
                           .start_ns = kStart + static_cast<std::int64_t>(first) * kSecond / 10,
                           .rows = count,
                           .step = 0.0});
  }
  /// Stops the service and starts another on the same port, with nothing in its memory but a rig.
  void restart(milliseconds away) {
    service::ServerOptions options;
    options.listen = address();
    options.limits.shutdown = milliseconds(0);
    server_.reset();
    std::this_thread::sleep_for(away);
    server_ = std::make_unique<service::Server>(options, clock_);
    ASSERT_TRUE(server_->registry().put({trolley(), "trolley.yaml", false, "", ""}).status.ok());
    std::string problem;
    for (int i = 0; i < 50 && !(problem = server_->start()).empty(); ++i)
      std::this_thread::sleep_for(milliseconds(100));
    ASSERT_EQ(problem, "");
  }
};

TEST_F(ClientTest, ConnectGivesUpWithTheAddress) {
  Client client("127.0.0.1:1", {.connect = milliseconds(300), .call = milliseconds(1000)});
  EXPECT_TRUE(is_status(client.connect(), StatusCode::UNAVAILABLE, "127.0.0.1:1"));
}

TEST_F(ClientTest, ConnectCanBeStopped) {
  Client client("127.0.0.1:1");
  std::stop_source stop;
  std::thread stopper([&] {
    std::this_thread::sleep_for(milliseconds(100));
    stop.request_stop();
  });
  EXPECT_TRUE(is_status(client.connect(stop.get_token()), StatusCode::CANCELLED, ""));
  stopper.join();
}

TEST_F(ClientTest, ConnectSaysWhenItIsAnotherService) {
  grpc::EnableDefaultHealthCheckService(true);
  grpc::ServerBuilder builder;  // health alone
  int port = 0;
  builder.AddListeningPort("127.0.0.1:0", grpc::InsecureServerCredentials(), &port);
  const auto server = builder.BuildAndStart();
  ASSERT_TRUE(server);
  Client client("127.0.0.1:" + std::to_string(port));
  EXPECT_TRUE(is_status(client.connect(), StatusCode::UNIMPLEMENTED, "is no steelyardd"));
  server->Shutdown();
}

TEST_F(ClientTest, CallsWork) {
  Client client(address());
  ASSERT_TRUE(client.connect().ok());
  v1::PutRigResponse put;
  ASSERT_TRUE(client.put_rig({.text = "rig: [", .file_name = "wrong.yaml"}, put).ok());
  ASSERT_GE(put.problems_size(), 1);
  EXPECT_NE(put.problems(0).text().find("wrong.yaml:1"), std::string::npos);
  for (const char* name : {"b", "a"})
    ASSERT_TRUE(is_status(client.put_rig({.text = trolley(name)}, put), StatusCode::OK, ""));
  EXPECT_EQ(put.revision(), 1U);
  std::vector<v1::RigSummary> rigs;
  ASSERT_TRUE(client.list_rigs(rigs).ok());
  ASSERT_EQ(rigs.size(), 2U);
  EXPECT_EQ(rigs[0].name(), "a");
  v1::GetRigResponse got;
  ASSERT_TRUE(client.get_rig("a", got).ok());
  EXPECT_EQ(got.file(), trolley("a"));
  v1::Moment moment;
  ASSERT_TRUE(client.estimate("a", {}, moment).ok());
  EXPECT_TRUE(is_status(client.estimate("a", 5, moment), StatusCode::FAILED_PRECONDITION, "time_ns"));
  ASSERT_TRUE(client.remove_rig("a").ok());
  EXPECT_TRUE(is_status(client.remove_rig("a"), StatusCode::NOT_FOUND, "\"a\""));
}

TEST_F(ClientTest, ListGoesThroughAllPages) {
  service::ServerOptions options;
  options.limits.list_page = 2;
  start(options);
  Client client(address());
  v1::PutRigResponse put;
  for (const char* name : {"a", "b", "c", "d", "e"})
    ASSERT_TRUE(is_status(client.put_rig({.text = trolley(name)}, put), StatusCode::OK, ""));
  std::vector<v1::RigSummary> rigs;
  ASSERT_TRUE(client.list_rigs(rigs).ok());
  EXPECT_EQ(rigs.size(), 5U);
}

TEST_F(ClientTest, FeedReportsTakenRefusedAndUnknown) {
  ASSERT_TRUE(put(trolley()).ok());
  Client client(address());
  int told = 0;
  auto feed = client.feed({.rig = "trolley",
                           .source = "plc",
                           .channels = {"left", "middle"},
                           .on_refused = [&](const v1::Refused&) { ++told; }});
  EXPECT_TRUE(is_status(feed->send(rows(1, 1)), StatusCode::FAILED_PRECONDITION, "not open"));
  ASSERT_TRUE(feed->open().ok());
  EXPECT_EQ(feed->progress().next_sequence, 1U);
  EXPECT_EQ(feed->progress().unknown_channels, std::vector<std::string>{"middle"});
  ASSERT_TRUE(feed->send(rows(1, 10)).ok());
  v1::Batch unknown = rows(11, 2);
  unknown.set_channel(0, 1);
  ASSERT_TRUE(feed->send(unknown).ok());
  ASSERT_TRUE(feed->finish().ok());
  const FeedProgress progress = feed->progress();
  EXPECT_EQ(progress.taken, 12U);
  EXPECT_EQ(progress.kept, 0U);
  EXPECT_EQ(progress.refused, 1U);
  ASSERT_EQ(progress.refusals.size(), 1U);
  EXPECT_EQ(progress.refusals[0].sequence(), 11U);
  EXPECT_EQ(told, 1);
}

TEST_F(ClientTest, FeedOfNoRigFailsAtOnce) {
  Client client(address());
  auto feed = client.feed({.rig = "nobody", .source = "plc", .channels = {}});
  const auto start = std::chrono::steady_clock::now();
  EXPECT_TRUE(is_status(feed->open(), StatusCode::NOT_FOUND, "\"nobody\""));
  EXPECT_LT(std::chrono::steady_clock::now() - start, std::chrono::seconds(5));
}

TEST_F(ClientTest, WrongBatchIsTheServicesVerdictNotABreak) {
  ASSERT_TRUE(put(trolley()).ok());
  Client client(address());
  auto feed = client.feed({.rig = "trolley", .source = "plc", .channels = {"left"}});
  ASSERT_TRUE(feed->open().ok());
  v1::Batch wrong = rows(1, 3);
  wrong.add_channel(0);
  grpc::Status status = feed->send(wrong);
  if (status.ok()) status = feed->finish();
  EXPECT_TRUE(is_status(status, StatusCode::INVALID_ARGUMENT, "3, 4 and 3 rows"));
  EXPECT_EQ(feed->progress().breaks, 0U);
}

TEST_F(ClientTest, FeedGoesOnAfterTheServiceWasAway) {
  ASSERT_TRUE(put(trolley()).ok());
  Client client(address());
  int breaks = 0;
  int repairs = 0;
  auto feed =
      client.feed({.rig = "trolley",
                   .source = "plc",
                   .channels = {"left"},
                   .most_in_flight = 1000,
                   .on_break = [&](const grpc::Status& status) { ++(status.ok() ? repairs : breaks); }});
  ASSERT_TRUE(feed->open().ok());
  clock_.set(kStart + 1'000'000 * kSecond);
  std::thread away;
  std::uint64_t sent = 0;
  // Until the break has been noticed (the service takes its time to end), and some more.
  for (int after = 0; after < 10 && sent<100'000; after += breaks> 0 ? 1 : 0) {
    if (sent == 2000) away = std::thread([this] { restart(milliseconds(500)); });
    ASSERT_TRUE(feed->send(rows(sent + 1, 100)).ok());
    sent += 100;
    std::this_thread::sleep_for(milliseconds(20));
  }
  ASSERT_TRUE(feed->finish().ok());
  away.join();
  const FeedProgress progress = feed->progress();
  EXPECT_EQ(progress.taken, sent);
  EXPECT_EQ(progress.refused, 0U);
  EXPECT_GE(breaks, 1);
  EXPECT_EQ(repairs, breaks);
  v1::Moment moment;
  ASSERT_TRUE(client.estimate("trolley", {}, moment).ok());
  EXPECT_EQ(moment.clock_ns(), kStart + static_cast<std::int64_t>(sent) * kSecond / 10);
}

TEST_F(ClientTest, FeedGivesUpWhenItsPatienceEnds) {
  ASSERT_TRUE(put(trolley()).ok());
  Client client(address(), {.connect = milliseconds(500), .call = milliseconds(1000)});
  auto feed = client.feed({.rig = "trolley", .source = "plc", .channels = {"left"}, .most_in_flight = 10});
  ASSERT_TRUE(feed->open().ok());
  server_.reset();
  grpc::Status status;
  for (std::uint64_t first = 1; status.ok() && first < 1000; first += 10)
    status = feed->send(rows(first, 10));
  EXPECT_TRUE(is_status(status, StatusCode::UNAVAILABLE, ""));
  start();
}

TEST_F(ClientTest, SendWaitsWhileTooMuchIsInFlightAndCanBeCancelled) {
  ASSERT_TRUE(put(trolley()).ok());
  Client client(address());
  auto feed = client.feed({.rig = "trolley", .source = "plc", .channels = {"left"}, .most_in_flight = 100});
  ASSERT_TRUE(feed->open().ok());
  clock_.close_gate();
  ASSERT_TRUE(feed->send(rows(1, 100)).ok());
  clock_.wait_for_visitor();
  std::thread canceller([&] {
    std::this_thread::sleep_for(milliseconds(200));
    feed->cancel();
  });
  EXPECT_TRUE(is_status(feed->send(rows(101, 1)), StatusCode::CANCELLED, ""));
  canceller.join();
  clock_.open_gate();
}

TEST_F(ClientTest, WatchEndsWhenTheCallerHasEnough) {
  ASSERT_TRUE(put(trolley()).ok());
  Client client(address());
  v1::WatchRequest request = service::watch_request("trolley");
  request.set_fixed_rate_hz(200);
  int updates = 0;
  EXPECT_TRUE(client.watch(request, [&](const v1::WatchResponse&) { return ++updates < 5; }).ok());
  EXPECT_EQ(updates, 5);
}

TEST_F(ClientTest, WatchEndsWhenItIsStopped) {
  ASSERT_TRUE(put(trolley()).ok());
  Client client(address());
  std::stop_source stop;
  int updates = 0;
  const auto count = [&](const v1::WatchResponse&) {
    if (++updates == 1) stop.request_stop();
    return true;
  };
  EXPECT_TRUE(client.watch(service::watch_request("trolley"), count, stop.get_token()).ok());
  EXPECT_EQ(updates, 1);
  const auto ignore = [](const v1::WatchResponse&) { return true; };
  EXPECT_TRUE(
      is_status(client.watch(service::watch_request("nobody"), ignore), StatusCode::NOT_FOUND, "\"nobody\""));
}

}  // namespace
}  // namespace steelyard::client
