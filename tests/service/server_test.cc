// SPDX-License-Identifier: Apache-2.0
// Start, health, reflection, rig directories, orderly end.
#include "service/server.h"

#include <grpcpp/generic/generic_stub.h>

#include <chrono>
#include <filesystem>
#include <fstream>

#include "fixture.h"

namespace steelyard::service {
namespace {

using grpc::StatusCode;

class ServerTest : public ServiceTest {
 protected:
  /// One message to a method, and the first answer, as bytes.
  std::string ask(const std::string& method, const std::string& bytes) {
    const auto channel = grpc::CreateChannel("127.0.0.1:" + std::to_string(server_->port()),
                                             grpc::InsecureChannelCredentials());
    grpc::GenericStub stub(channel);
    grpc::ClientContext context;
    grpc::CompletionQueue queue;
    void* tag = nullptr;
    bool ok = false;
    auto call = stub.PrepareCall(&context, method, &queue);
    call->StartCall(nullptr);
    queue.Next(&tag, &ok);
    const grpc::Slice slice(bytes);
    call->Write(grpc::ByteBuffer(&slice, 1), nullptr);
    queue.Next(&tag, &ok);
    grpc::ByteBuffer answer;
    call->Read(&answer, nullptr);
    queue.Next(&tag, &ok);
    grpc::Slice all;
    const std::string text = ok && answer.TrySingleSlice(&all).ok()
                                 ? std::string(reinterpret_cast<const char*>(all.begin()), all.size())
                                 : "";
    context.TryCancel();
    grpc::Status status;
    call->Finish(&status, nullptr);
    queue.Next(&tag, &ok);
    return text;
  }
};

TEST_F(ServerTest, HealthSaysServing) {
  EXPECT_EQ(ask("/grpc.health.v1.Health/Check", ""), std::string("\x08\x01"));
  EXPECT_EQ(ask("/grpc.health.v1.Health/Check", "\x0a\x16steelyard.v1.Steelyard"), std::string("\x08\x01"));
}

TEST_F(ServerTest, ReflectionListsTheService) {
  const std::string answer =
      ask("/grpc.reflection.v1alpha.ServerReflection/ServerReflectionInfo", std::string("\x3a\x01*"));
  EXPECT_NE(answer.find("steelyard.v1.Steelyard"), std::string::npos);
}

TEST_F(ServerTest, PortInUseIsSaid) {
  ServerOptions options;
  options.listen = "127.0.0.1:" + std::to_string(server_->port());
  Server second(options, clock_);
  EXPECT_NE(second.start().find("in use"), std::string::npos);
}

TEST_F(ServerTest, EndTakesWhatIsInTheMailboxesAndEndsStreams) {
  ASSERT_TRUE(put(trolley()).ok());
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  feed.answer();
  WatchCall watch(*stub_, watch_request("trolley"));
  watch.next();
  v1::WatchRequest fixed = watch_request("trolley");
  fixed.set_fixed_rate_hz(100);
  WatchCall steady(*stub_, fixed);
  steady.next();
  clock_.close_gate();  // the worker cannot finish yet
  feed.send(batch({.rows = 300}));
  clock_.wait_for_visitor();
  std::thread ending([this] { server_->shut_down(); });
  std::this_thread::sleep_for(std::chrono::milliseconds(100));
  clock_.open_gate();
  feed.until_taken(300);
  EXPECT_TRUE(is_status(feed.status(), StatusCode::UNAVAILABLE, "stopping"));
  v1::WatchResponse update;
  std::int64_t last = 0;
  while (watch.next(update)) last = update.moment().clock_ns();
  EXPECT_EQ(last, kStart + 299 * kSecond / 10);
  EXPECT_TRUE(is_status(watch.status(), StatusCode::UNAVAILABLE, "stopping"));
  EXPECT_TRUE(is_status(steady.status(), StatusCode::UNAVAILABLE, "stopping"));
  ending.join();
}

TEST_F(ServerTest, EndIsBoundedThoughAReaderHoldsOn) {
  ServerOptions options;
  options.limits.shutdown = std::chrono::milliseconds(300);
  start(options);
  ASSERT_TRUE(put(trolley()).ok());
  grpc::ChannelArguments arguments;
  arguments.SetInt(GRPC_ARG_HTTP2_BDP_PROBE, 0);
  arguments.SetInt(GRPC_ARG_HTTP2_STREAM_LOOKAHEAD_BYTES, 1024);
  const auto narrow = new_stub(arguments);
  v1::WatchRequest request = watch_request("trolley");
  request.set_every_moment(true);
  WatchCall watch(*narrow, request);
  watch.next();
  FeedCall feed(*stub_, "trolley", "plc", {"left"});
  feed.send(batch({.rows = 3000}));
  std::this_thread::sleep_for(std::chrono::milliseconds(300));
  const auto start = std::chrono::steady_clock::now();
  server_->shut_down();
  EXPECT_LT(std::chrono::steady_clock::now() - start, std::chrono::seconds(5));
  EXPECT_FALSE(watch.status().ok());
}

TEST_F(ServerTest, WrongFileOfADirectoryStopsNoOther) {
  const auto directory =
      std::filesystem::temp_directory_path() / ("steelyard_rigs_" + std::to_string(::getpid()));
  std::filesystem::create_directories(directory / "sub.yaml");  // a directory of that name
  std::ofstream(directory / "a.yaml") << trolley("a");
  std::ofstream(directory / "b.yaml") << "rig: b\nchannels: [";
  std::ofstream(directory / "c.yaml") << trolley("c");
  std::ofstream(directory / "d.txt") << trolley("d");
  EXPECT_EQ(server_->put_directory(directory), 2);
  v1::Moment moment;
  EXPECT_TRUE(estimate("a", moment).ok());
  EXPECT_TRUE(estimate("c", moment).ok());
  EXPECT_FALSE(estimate("b", moment).ok());
  EXPECT_FALSE(estimate("d", moment).ok());
  std::filesystem::remove_all(directory);
}

TEST(Addresses, LoopbackIsRecognised) {
  for (const char* address : {"127.0.0.1:7411", "127.1.2.3:0", "localhost:1", "[::1]:7411"}) {
    EXPECT_EQ(check_address(address), "");
    EXPECT_TRUE(is_loopback(address)) << address;
  }
  for (const char* address :
       {"0.0.0.0:7411", "[::]:7411", "192.168.1.5:1", "plant.example:7411", "127.example:7411"}) {
    EXPECT_EQ(check_address(address), "");
    EXPECT_FALSE(is_loopback(address)) << address;
  }
  for (const char* address : {"", "7411", ":7411", "localhost", "localhost:", "localhost:x",
                              "localhost:65536", "localhost:-1", "::1:7411", "unix:/tmp/socket:1", "a b:"}) {
    EXPECT_NE(check_address(address), "") << address;
  }
}

}  // namespace
}  // namespace steelyard::service
