#include "sequencer/recorder.hpp"

#include <boost/asio/async_result.hpp>
#include <boost/asio/executor_work_guard.hpp>
#include <boost/asio/post.hpp>
#include <boost/asio/thread_pool.hpp>
#include <boost/asio/use_awaitable.hpp>

namespace jigwright {
namespace {

class NullRecorder final : public Recorder {
 public:
  Task<Result<OpenTrial>> begin(const TrialStart&) override { co_return OpenTrial{}; }
  Task<Result<Done>> write(std::function<Result<Done>()>) override { co_return Done{}; }
  Task<Result<Done>> finish(const OpenTrial&, const TrialEnd&) override { co_return Done{}; }
};

class ThreadRecorder final : public Recorder {
 public:
  ThreadRecorder(TrialLog& log, Clock& clock, asio::io_context& io) : log_(log), clock_(clock), io_(io) {}
  ~ThreadRecorder() override { thread_.join(); }

  Task<Result<OpenTrial>> begin(const TrialStart& start) override {
    const Clock::Hold hold(clock_);
    co_return co_await on_thread<Result<OpenTrial>>([this, &start] { return log_.begin_trial(start); });
  }
  Task<Result<Done>> write(std::function<Result<Done>()> work) override {
    const Clock::Hold hold(clock_);
    Result<Done> done = co_await on_thread<Result<Done>>([&work] { return work(); });
    asio::post(thread_, [this] { log_.upkeep(); });
    co_return done;
  }
  Task<Result<Done>> finish(const OpenTrial& trial, const TrialEnd& end) override {
    const Clock::Hold hold(clock_);
    Result<Done> done =
        co_await on_thread<Result<Done>>([this, &trial, &end] { return log_.finish_trial(trial, end); });
    asio::post(thread_, [this] { log_.upkeep(); });
    co_return done;
  }

 private:
  /// Runs the work on the store's thread and resumes on the context's. The arguments live in the waiting coroutine.
  template <class T, class Work>
  Task<T> on_thread(Work work) {
    using Await = asio::use_awaitable_t<Exec>;
    co_return co_await asio::async_initiate<const Await, void(T)>(
        [this, &work](auto handler) {
          auto guard = asio::make_work_guard(io_);
          asio::post(thread_, [this, &work, guard = std::move(guard), handler = std::move(handler)]() mutable {
            T result = work();
            asio::post(io_, [handler = std::move(handler), result = std::move(result)]() mutable {
              std::move(handler)(std::move(result));
            });
          });
        },
        Await{});
  }

  TrialLog& log_;
  Clock& clock_;
  asio::io_context& io_;
  asio::thread_pool thread_{1};
};

}  // namespace

std::unique_ptr<Recorder> make_null_recorder() {
  return std::make_unique<NullRecorder>();
}

std::unique_ptr<Recorder> make_recorder(TrialLog& log, Clock& clock, asio::io_context& io) {
  return std::make_unique<ThreadRecorder>(log, clock, io);
}

}  // namespace jigwright
