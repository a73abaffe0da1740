// `jigwright try`: one board, or every board of an order, on the jig that the plan names.
#include <fmt/format.h>
#include <unistd.h>

#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/signal_set.hpp>
#include <chrono>
#include <csignal>
#include <cstdio>
#include <deque>

#include "base/nearest.hpp"
#include "db/orders.hpp"
#include "db/store.hpp"
#include "fixtures/simulated/simulated_bench.hpp"
#include "sequencer/trial.hpp"
#include "station/commands.hpp"
#include "station/exit_codes.hpp"
#include "station/fail.hpp"
#include "station/watch.hpp"

namespace jigwright {
namespace {

/// The boards to try, in build order: as the store knows the order, else as the scenario does.
Result<std::deque<std::string>> boards(const TryOptions& options, Store& store, const Scenario& scenario) {
  if (!options.serial.empty()) return std::deque<std::string>{options.serial};
  auto known = serials_of_order(store.database(), options.order);
  if (!known) return known.error();
  std::vector<std::string> serials = std::move(known.value());
  if (serials.empty()) serials = scenario_serials(scenario, options.order);
  if (serials.empty()) {
    const std::vector<std::string> orders = scenario_orders(scenario);
    const auto near = nearest(options.order, orders);
    return Error{Error::Kind::usage, fmt::format("no board of order \"{}\" is known", options.order), "--order",
                 near ? fmt::format("write \"{}\"", *near) : "enter its boards first (jigwright enter boards.csv)"};
  }
  return std::deque<std::string>(serials.begin(), serials.end());
}

/// Everything that a run of trials stands on, in the order of building.
class Run {
 public:
  Run(const TryOptions& options, std::shared_ptr<const ReadyPlan> plan, std::shared_ptr<const Scenario> scenario,
      Store& store)
      : options_(options),
        plan_(std::move(plan)),
        clock_(options.real_time ? make_real_clock(io_) : make_virtual_clock()),
        bench_(make_simulated_bench(plan_->jig, std::move(scenario), *clock_,
                                    SimulatedOptions(options.seed, options.faults))),
        watcher_(watcher()),
        person_(make_person(io_, *clock_, options.answers, options.json,
                            ::isatty(STDIN_FILENO) == 1 && ::isatty(STDOUT_FILENO) == 1)),
        recorder_(make_recorder(store, *clock_, io_)),
        trials_(io_, *bench_, plan_, *watcher_, *person_, *recorder_, setup()),
        signals_(io_, SIGINT, SIGTERM, SIGHUP) {
    // A reader that goes away must not kill a trial before the jig is safe.
    std::signal(SIGPIPE, SIG_IGN);
  }

  int play(std::deque<std::string> serials) {
    serials_ = std::move(serials);
    signals_.async_wait([this](const boost::system::error_code& fault, int) {
      if (!fault) trials_.stop("stopped at the station (Ctrl-C, or a request to end)");
    });
    const auto began = std::chrono::steady_clock::now();
    running_ = plan_->jig->nests;
    for (int nest = 1; nest <= plan_->jig->nests; ++nest) asio::co_spawn(io_, nest_loop(nest), asio::detached);
    clock_->run(io_);
    watcher_->run_ended(std::chrono::duration<double>(std::chrono::steady_clock::now() - began).count());
    return exit_code();
  }

 private:
  Task<void> nest_loop(int nest) {
    while (!serials_.empty() && !trials_.stopped()) {
      std::string serial = std::move(serials_.front());
      serials_.pop_front();
      const TrialResult result = co_await trials_.run(nest, std::move(serial), options_.order);
      if (std::fflush(stdout) != 0 || std::ferror(stdout) != 0) trials_.stop("nobody reads the output any more");
      if (!result.recorded) {
        store_failed_ = true;
        serials_.clear();
      }
    }
    if (--running_ == 0) signals_.cancel();
  }

  int exit_code() const {
    const Tally& tally = watcher_->tally();
    if (store_failed_) return exit_store;
    if (trials_.stopped() && !serials_.empty()) return exit_stopped;
    if (tally.no_go > 0) return exit_no_go;
    return tally.voids > 0 ? exit_void : exit_go;
  }

  std::unique_ptr<Watcher> watcher() const {
    if (options_.json) return make_json_watcher(stdout);
    const Detail detail = options_.quiet ? Detail::nothing : options_.order.empty() ? Detail::findings : Detail::boards;
    return make_text_watcher(stdout, detail, ::isatty(STDOUT_FILENO) == 1);
  }

  TrialSetup setup() const {
    TrialSetup s;
    s.station = options_.station_name;
    s.operator_name = options_.operator_name;
    s.program = options_.program;
    s.origin = Origin::simulated;
    s.utc_us = utc_us;
    if (!plan_->jig->scenario.empty())
      if (const auto text = read_source(plan_->jig->scenario); text.ok())
        s.documents.push_back({"scenario", plan_->jig->scenario, text.value()->text});
    return s;
  }

  const TryOptions& options_;
  std::shared_ptr<const ReadyPlan> plan_;
  asio::io_context io_{1};
  std::unique_ptr<Clock> clock_;
  std::unique_ptr<Bench> bench_;
  std::unique_ptr<Watcher> watcher_;
  std::unique_ptr<Person> person_;
  std::unique_ptr<Recorder> recorder_;
  Trials trials_;
  asio::signal_set signals_;
  std::deque<std::string> serials_;
  int running_{0};
  bool store_failed_{false};
};

/// A serial goes onto screens, labels and into lists: nothing in it may drive a terminal or end a line.
Result<Done> check_serial(const std::string& serial) {
  const auto bad = [&](std::string what) {
    return Error{Error::Kind::usage, std::move(what), "--serial", "scan or type the board's own serial"};
  };
  if (serial.size() > 64) return bad("the serial is longer than 64 characters: two scans run together?");
  if (printable(serial) != serial)
    return bad(fmt::format("the serial \"{}\" holds control characters", printable(serial)));
  if (serial.find_first_not_of(' ') == std::string::npos) return bad("the serial is empty");
  return Done{};
}

}  // namespace

int try_boards(const TryOptions& options) {
  if (options.order.empty())
    if (const auto sound = check_serial(options.serial); !sound.ok()) return fail(sound.error());
  Faults faults;
  const auto plan = read_plan(options.plan, faults);
  std::shared_ptr<const Scenario> scenario;
  if (plan) scenario = read_scenario(*plan->jig, faults);
  if (!scenario) {
    fmt::print(stderr, "{}{} faults: no relay moved\n", render(faults), faults.count(Severity::fault));
    return exit_files;
  }
  if (const auto words = check_fault_words(*plan->jig, options.faults); !words.ok()) return fail(words.error());
  for (const CalibrationState& c : calibrations_due(plan->jig->calibrations, utc_us())) {
    if (c.overdue())
      return fail({Error::Kind::instrument, sentence(c), plan->jig->source_text->name,
                   "no board is tried until it is calibrated, or jig.toml says a new date"});
    tell(sentence(c));
  }
  StoreOptions how;
  how.backups = options.backups;
  auto store = Store::open(options.store, how);
  if (!store.ok()) return fail(store.error());
  tell(store.value()->notice());
  auto serials = boards(options, *store.value(), *scenario);
  if (!serials.ok()) return fail(serials.error());
  int code = exit_fault;
  {
    Run run(options, plan, scenario, *store.value());
    code = run.play(std::move(serials.value()));
  }
  store.value()->finish_upkeep();
  for (const std::string& news : store.value()->take_news()) tell(news);
  return code;
}

}  // namespace jigwright
