// SPDX-License-Identifier: Apache-2.0
// Everything behind the streams without a connection: workers, mailboxes, desks, registry, with sessions of
// the test's own. gRPC as Debian builds it is not instrumented for the thread sanitizer, which therefore sees
// races in it that are none; here nothing of it runs, and no suppression is needed.
#include <gtest/gtest.h>

#include <atomic>
#include <condition_variable>
#include <mutex>
#include <random>
#include <thread>
#include <vector>

#include "fixture.h"
#include "service/registry.h"

namespace steelyard::service {
namespace {

constexpr int kMessages = 40;
constexpr int kRows = 5;

/// Posts as a stream does: waits while there is no room.
class Source final : public FeedSession, public std::enable_shared_from_this<Source> {
 public:
  void opened(v1::Opened, std::uint64_t, bool) override {
    note([] {});
  }
  void dealt(Dealt dealt) override {
    note([&] { taken_ = dealt.taken; });
  }
  void room() override {
    note([&] { room_ = true; });
  }
  void end(const grpc::Status& status) override {
    note([&] { ended_ = status; });
  }

  void run(Host& host, const std::string& name) {
    post(host, OpenFeed{name, {"left", "right"}});
    for (int i = 0; i < kMessages; ++i) post(host, rows(i));
    std::unique_lock lock(mutex_);
    changed_.wait(lock, [&] { return ended_ || taken_ == kMessages * kRows; });
  }
  void close(Host& host) { (void)host.post({shared_from_this(), CloseFeed{}}); }
  std::uint64_t taken() {
    const std::lock_guard lock(mutex_);
    return taken_;
  }

 private:
  template <typename Change>
  void note(const Change& change) {
    const std::lock_guard lock(mutex_);
    change();
    changed_.notify_all();
  }
  void post(Host& host, decltype(FeedMessage::content) content) {
    {
      std::unique_lock lock(mutex_);
      changed_.wait(lock, [&] { return room_ || ended_; });
      if (ended_) return;
      room_ = false;
    }
    if (host.post({shared_from_this(), std::move(content)})) room();
  }
  static Rows rows(int message) {
    Rows message_rows;
    std::vector<Row>& rows = message_rows.rows;
    for (int i = message * kRows; i < (message + 1) * kRows; ++i) {
      rows.push_back({static_cast<std::uint64_t>(i + 1), kStart + i * kSecond / 10,
                      static_cast<std::uint32_t>(i % 2), 0, 1.0 + 0.001 * i, 0, 0});
    }
    return message_rows;
  }

  std::mutex mutex_;
  std::condition_variable changed_;
  bool room_ = true;
  std::uint64_t taken_ = 0;
  std::optional<grpc::Status> ended_;
};

/// Takes its updates late.
class Reader final : public WatchSession {
 public:
  void offer(std::shared_ptr<const v1::Moment> moment, std::uint64_t beat) override {
    const std::lock_guard lock(mutex_);
    if (waiting_.size() >= kMost) waiting_.clear();
    waiting_.push_back(std::move(moment));
    in_order_ = in_order_ && beat > beat_;
    beat_ = beat;
  }
  [[nodiscard]] std::size_t backlog() const override { return 0; }
  void end(const grpc::Status& status) override {
    const std::lock_guard lock(mutex_);
    ended_ = status;
  }
  void take() {
    const std::lock_guard lock(mutex_);
    for (const auto& moment : waiting_) sum_ += moment->states(0).mean();
    waiting_.clear();
  }
  [[nodiscard]] bool in_order() const {
    const std::lock_guard lock(mutex_);
    return in_order_;
  }
  [[nodiscard]] std::optional<grpc::Status> ended() const {
    const std::lock_guard lock(mutex_);
    return ended_;
  }

 private:
  static constexpr std::size_t kMost = 100;
  mutable std::mutex mutex_;
  std::vector<std::shared_ptr<const v1::Moment>> waiting_;
  std::uint64_t beat_ = 0;
  bool in_order_ = true;
  double sum_ = 0.0;
  std::optional<grpc::Status> ended_;
};

/// Keeps all that it is offered until it is told to let go.
class Hoarder final : public WatchSession {
 public:
  void offer(std::shared_ptr<const v1::Moment>, std::uint64_t) override { ++held_; }
  [[nodiscard]] std::size_t backlog() const override { return held_; }
  void end(const grpc::Status&) override {}
  std::size_t let_go() { return held_.exchange(0); }

 private:
  std::atomic<std::size_t> held_ = 0;
};

class DirectTest : public ::testing::Test {
 protected:
  DirectTest() {
    limits_.mailbox_readings = 20;
    clock_.set(kStart + 1'000'000 * kSecond);
  }
  std::shared_ptr<Host> host(const std::string& rig) {
    grpc::Status status;
    auto found = registry_.find(rig, status);
    EXPECT_TRUE(found) << status.error_message();
    return found;
  }
  grpc::Status put(const std::string& text) {
    return registry_.put({text, "test.yaml", false, "", ""}).status;
  }

  TestClock clock_;
  Limits limits_;
  WorkerPool workers_{clock_, 2};
  Registry registry_{workers_, clock_, limits_};
};

TEST_F(DirectTest, ManyThreadsAtOnceLoseNothing) {
  const std::vector<std::string> rigs = {"a", "b", "c"};
  for (const std::string& rig : rigs) ASSERT_TRUE(put(trolley(rig)).ok());
  std::vector<std::shared_ptr<Source>> sources;
  std::vector<std::shared_ptr<Reader>> readers;
  std::vector<std::thread> threads;
  std::atomic<bool> done = false;
  for (std::size_t i = 0; i < 6; ++i) {
    sources.push_back(std::make_shared<Source>());
    threads.emplace_back([this, i, &rigs, source = sources.back()] {
      source->run(*host(rigs[i % rigs.size()]), "source " + std::to_string(i));
    });
    readers.push_back(std::make_shared<Reader>());
    const Pace pace{static_cast<Pace::Kind>(i % 3), std::chrono::milliseconds(i % 3 == 2 ? 0 : 1)};
    ASSERT_TRUE(host(rigs[i / 2])->open_watch(readers.back(), pace).ok());
  }
  std::thread changer([&] {
    for (int i = 0; !done; ++i) {
      EXPECT_TRUE(put(trolley(rigs[0], i % 2 == 0 ? "# other\n" : "")).ok());
      EXPECT_TRUE(
          put(trolley(rigs[1], i % 2 == 0 ? "  third: {reads: speed, sd: 1, range: [-5, 5]}\n" : "")).ok());
      for (const auto& reader : readers) reader->take();
    }
  });
  std::thread asker([&] {
    std::atomic<int> asked = 0;
    std::atomic<int> answered = 0;
    while (!done || answered < asked) {
      if (done || asked > answered + 100) {
        std::this_thread::yield();
        continue;
      }
      ++asked;
      const auto status = host(rigs[0])->ask([&](Machine* machine, const grpc::Status&) {
        if (machine != nullptr) (void)machine->at_clock();
        ++answered;
      });
      EXPECT_TRUE(status.ok());
    }
  });
  for (std::thread& thread : threads) thread.join();
  done = true;
  changer.join();
  asker.join();
  for (const auto& source : sources)
    EXPECT_EQ(source->taken(), static_cast<std::uint64_t>(kMessages * kRows));
  for (const auto& reader : readers) EXPECT_TRUE(reader->in_order());
  registry_.stop();
  for (const auto& reader : readers) {
    while (!reader->ended()) std::this_thread::yield();
    EXPECT_EQ(reader->ended()->error_code(), grpc::StatusCode::UNAVAILABLE);
  }
}

TEST_F(DirectTest, WatchOfEveryMomentHoldsTheRigUpAtItsBound) {
  constexpr std::size_t kMoments = kMessages * kRows;  // far more than may wait
  limits_.moments_waiting = 40;
  limits_.chunk_moments = 10;
  ASSERT_TRUE(put(trolley("a")).ok());
  const auto rig = host("a");
  const auto hoarder = std::make_shared<Hoarder>();
  ASSERT_TRUE(rig->open_watch(hoarder, {Pace::Kind::kEveryMoment, {}}).ok());
  const auto source = std::make_shared<Source>();
  std::thread feeding([&] { source->run(*rig, "source"); });
  std::size_t seen = 0;
  while (seen < kMoments + 1) {  // and the first picture
    std::size_t before = 0;
    do {  // until nothing more comes
      before = hoarder->backlog();
      std::this_thread::sleep_for(std::chrono::milliseconds(20));
    } while (hoarder->backlog() != before);
    EXPECT_LE(before, limits_.moments_waiting);
    const std::size_t taken = hoarder->let_go();
    ASSERT_GT(taken, 0U) << "the rig stands still after " << seen;
    seen += taken;
    rig->wake();
  }
  feeding.join();
  EXPECT_EQ(seen, kMoments + 1);
}

TEST_F(DirectTest, RemovalAnswersEverybody) {
  ASSERT_TRUE(put(trolley("a")).ok());
  const auto removed = host("a");
  const auto source = std::make_shared<Source>();
  std::thread feeding([&] { source->run(*removed, "source"); });
  ASSERT_TRUE(registry_.remove("a", "", "").ok());
  feeding.join();
  source->close(*removed);
  std::atomic<bool> answered = false;
  std::atomic<bool> gone = false;
  ASSERT_TRUE(removed
                  ->ask([&](Machine* machine, const grpc::Status& ended) {
                    gone = machine == nullptr && ended.error_code() == grpc::StatusCode::NOT_FOUND;
                    answered = true;
                  })
                  .ok());
  while (!answered) std::this_thread::yield();
  EXPECT_TRUE(gone);
}

}  // namespace
}  // namespace steelyard::service
