// How fast trials are played: on the virtual clock (boards a second, against a floor of bare suspensions measured in
// the same run), and on the real clock (the program's own time beside the physical time of the plan). Figures, not
// tests.
#include <fmt/format.h>

#include <algorithm>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <chrono>
#include <ctime>

#include "fixtures/simulated/simulated_bench.hpp"
#include "sequencer/trial.hpp"

using namespace jigwright;

namespace {

struct Nobody final : Person {
  Task<Result<Reading>> ask(int, const Ask&, Duration) override {
    co_return Error{Error::Kind::person, "nobody", {}, {}};
  }
};

struct Counter final : Observer {
  std::int64_t settings{}, readings{}, findings{}, go{}, trials{};
  void trial_started(int, const TrialStart&) override {}
  void setting_started(const Progress&, const std::string&, const Setting&) override { ++settings; }
  void reading(const Progress&, const Setting&, const Reading&) override { ++readings; }
  void finding(int, const Metric&, const Limit*, const Judged&) override { ++findings; }
  void trial_ended(int, const TrialStart&, const TrialEnd& end, const std::string&, const Error*) override {
    ++trials;
    go += end.outcome.judgement == Judgement::go ? 1 : 0;
  }
  void notice(int, const std::string&) override {}
};

double wall_s() {
  return std::chrono::duration<double>(std::chrono::steady_clock::now().time_since_epoch()).count();
}
double cpu_s() {
  timespec t{};
  clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &t);
  return static_cast<double>(t.tv_sec) + static_cast<double>(t.tv_nsec) * 1e-9;
}

struct Played {
  Counter counter;
  double wall_s{}, cpu_s{}, clock_s{};
};

Played play(const std::shared_ptr<const ReadyPlan>& plan, const std::shared_ptr<const Scenario>& scenario, int boards,
            bool real) {
  Played out;
  asio::io_context io{1};
  const auto clock = real ? make_real_clock(io) : make_virtual_clock();
  const SimulatedOptions options;
  const auto bench = make_simulated_bench(plan->jig, scenario, *clock, options);
  const auto recorder = make_null_recorder();
  Nobody nobody;
  TrialSetup setup;
  setup.origin = Origin::simulated;
  Trials trials(io, *bench, plan, out.counter, nobody, *recorder, setup);
  const auto serials = scenario_serials(*scenario, "WO-1041");
  auto loop = [&]() -> Task<void> {
    for (int i = 0; i < boards; ++i)
      co_await trials.run(1, serials[static_cast<std::size_t>(i) % serials.size()], "WO-1041");
  };
  const double wall = wall_s(), cpu = cpu_s();
  asio::co_spawn(io, loop(), asio::detached);
  clock->run(io);
  out.wall_s = wall_s() - wall;
  out.cpu_s = cpu_s() - cpu;
  out.clock_s = seconds(clock->now());
  return out;
}

/// The floor: a coroutine that does nothing but sleep this often on the virtual clock.
double bare_suspensions_s(std::int64_t n) {
  asio::io_context io{1};
  const auto clock = make_virtual_clock();
  auto loop = [&]() -> Task<void> {
    for (std::int64_t i = 0; i < n; ++i) co_await clock->sleep_until(clock->now() + Duration(1000));
  };
  const double began = cpu_s();
  asio::co_spawn(io, loop(), asio::detached);
  clock->run(io);
  return cpu_s() - began;
}

}  // namespace

int main(int argc, char** argv) {
  const std::string folder = argc > 1 ? argv[1] : "sample-runs";
  Faults faults;
  const auto plan = read_plan(folder + "/plan-b.toml", faults);
  const auto scenario = plan ? read_scenario(*plan->jig, faults) : nullptr;
  if (!scenario) {
    fmt::print(stderr, "{}", render(faults));
    return 1;
  }
  play(plan, scenario, 50, false);  // warm
  std::vector<double> rates, ratios;
  Played last;
  const int boards = 720;
  for (int run = 0; run < 5; ++run) {
    last = play(plan, scenario, boards, false);
    const double floor_s = bare_suspensions_s(last.counter.readings + last.counter.settings);
    rates.push_back(boards / last.cpu_s);
    ratios.push_back(last.cpu_s / floor_s);
  }
  std::sort(rates.begin(), rates.end());
  std::sort(ratios.begin(), ratios.end());
  const Counter& c = last.counter;
  fmt::print("plan B, virtual clock, no store: {} settings, {} readings, {} findings a board\n", c.settings / c.trials,
             c.readings / c.trials, c.findings / c.trials);
  fmt::print("  {:.0f} boards a second of one core's time (median of 5 x {} boards; {:.0f} to {:.0f})\n", rates[2],
             boards, rates.front(), rates.back());
  fmt::print("  {:.1f} times a bare coroutine that sleeps as often as a trial reads and sets (the floor, same run)\n",
             ratios[2]);
  const Played ideal = play(plan, scenario, 1, false);
  const Played real = play(plan, scenario, 1, true);
  fmt::print("plan B, real clock, one board: physical time {:.3f} s, took {:.3f} s, overhead {:.2f} %, cpu {:.3f} s\n",
             ideal.clock_s, real.wall_s, 100 * (real.wall_s - ideal.clock_s) / ideal.clock_s, real.cpu_s);
  return 0;
}
