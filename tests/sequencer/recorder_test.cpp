#include "sequencer/recorder.hpp"

#include <doctest/doctest.h>

#include <atomic>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <chrono>
#include <future>

using namespace jigwright;

namespace {

/// Its upkeep waits until the end of the trial has been answered, ten seconds at most.
class WaitingLog final : public TrialLog {
 public:
  Result<OpenTrial> begin_trial(const TrialStart&) override { return OpenTrial{}; }
  Result<Done> finish_trial(const OpenTrial&, const TrialEnd&) override { return Done{}; }
  void upkeep() override {
    ++calls;
    came_after = answered.get_future().wait_for(std::chrono::seconds(10)) == std::future_status::ready;
  }

  std::promise<void> answered;
  std::atomic<int> calls{0};
  std::atomic<bool> came_after{false};
};

}  // namespace

TEST_CASE("upkeep begins once the trial's end has been answered, and ends before the recorder does") {
  WaitingLog log;
  asio::io_context io{1};
  const auto clock = make_virtual_clock();
  auto recorder = make_recorder(log, *clock, io);
  auto one = [&]() -> Task<void> {
    const TrialStart start;
    const TrialEnd end;
    const auto open = co_await recorder->begin(start);
    REQUIRE(open.ok());
    CHECK(log.calls == 0);
    const auto done = co_await recorder->finish(open.value(), end);
    REQUIRE(done.ok());
    log.answered.set_value();
  };
  asio::co_spawn(io, one(), asio::detached);
  clock->run(io);
  recorder.reset();
  CHECK(log.calls == 1);
  CHECK(log.came_after);
}
