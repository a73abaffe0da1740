#include "station/jig_check.hpp"

#include <fmt/format.h>
#include <unistd.h>

#include <CLI/CLI.hpp>
#include <algorithm>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/signal_set.hpp>
#include <csignal>

#include "db/jig_checks.hpp"
#include "db/store.hpp"
#include "fixtures/simulated/simulated_bench.hpp"
#include "sequencer/station_file.hpp"
#include "sequencer/trial.hpp"
#include "station/exit_codes.hpp"
#include "station/fail.hpp"
#include "station/jig_check_text.hpp"
#include "station/watch.hpp"

namespace jigwright {
namespace {

constexpr double answer_allowance_s = 600;

struct Told {
  std::string plan, operator_name, program;
  std::vector<std::string> faults, answers;
  std::uint64_t seed{1};
  int nest{1};
  bool yes{false};
};

/// What stands in the record of a check.
std::string word(PartVerdict verdict) {
  return verdict == PartVerdict::met ? "ok" : verdict == PartVerdict::failed ? "failed" : "in doubt";
}

/// What came of a check.
struct Outcomes {
  std::vector<CheckedPart> parts;
  std::map<std::string, std::string> uuids;  ///< of the trials, by the plan's id
  bool stopped{false}, store_failed{false};
};

/// All parts, one after another on one bench; ends with the first that is not met.
class Check {
 public:
  Check(const Told& told, const StationFile& station, const CheckPlans& plans, std::shared_ptr<const Scenario> scenario,
        std::vector<std::pair<std::string, std::string>> answers, Store& store)
      : told_(told),
        station_(station),
        clock_(make_virtual_clock()),
        bench_(make_simulated_bench(plans.front()->jig, std::move(scenario), *clock_,
                                    SimulatedOptions(told.seed, told.faults))),
        watcher_(make_text_watcher(stdout, Detail::nothing, ::isatty(STDOUT_FILENO) == 1)),
        person_(make_person(io_, *clock_, std::move(answers), false,
                            ::isatty(STDIN_FILENO) == 1 && ::isatty(STDOUT_FILENO) == 1)),
        recorder_(make_recorder(store, *clock_, io_)),
        signals_(io_, SIGINT, SIGTERM, SIGHUP) {
    for (const auto& plan : plans) out_.parts.push_back({plan, {}, {}});
    std::signal(SIGPIPE, SIG_IGN);
  }

  Outcomes play() {
    signals_.async_wait([this](const boost::system::error_code& fault, int) {
      if (fault) return;
      out_.stopped = true;
      person_->stop();
      if (trials_) trials_->stop("stopped at the station (Ctrl-C, or a request to end)");
    });
    asio::co_spawn(io_, parts(), asio::detached);
    clock_->run(io_);
    return std::move(out_);
  }

 private:
  Task<void> parts() {
    for (CheckedPart& part : out_.parts) {
      const std::string why = co_await placed(part.plan->plan);
      part.says.why = out_.stopped ? "stopped" : why;
      if (out_.stopped || !why.empty()) break;
      co_await try_part(part);
      if (part.says.verdict != PartVerdict::met || out_.stopped) break;
    }
    signals_.cancel();
  }

  /// Asks whether the part's thing lies in the nest. Empty = it does.
  Task<std::string> placed(const Plan& plan) {
    if (told_.yes) co_return std::string();
    Ask question;
    question.step = plan.id;
    question.question = plan.check.place;
    const auto answer = co_await person_->ask(told_.nest, question, clock_->now() + from_seconds(answer_allowance_s));
    if (!answer.ok()) co_return describe(answer.error());
    const bool yes = answer.value().state == ReadingState::ok && answer.value().value == 1;
    co_return yes ? "" : fmt::format("answered no: {}", plan.check.place);
  }

  Task<void> try_part(CheckedPart& part) {
    trials_ = std::make_unique<Trials>(io_, *bench_, part.plan, *watcher_, *person_, *recorder_, setup(*part.plan));
    TrialResult result = co_await trials_->run(told_.nest, part.plan->plan.check.serial, "");
    part.says = judge_part(part.plan->plan.check, result.end, result.recorded);
    out_.store_failed = out_.store_failed || !result.recorded;
    if (result.recorded) out_.uuids[part.plan->plan.id] = text(result.uuid);
    part.end = std::move(result.end);
  }

  TrialSetup setup(const ReadyPlan& plan) const {
    TrialSetup s;
    s.station = station_.name;
    s.operator_name = told_.operator_name;
    s.program = told_.program;
    s.origin = Origin::simulated;
    s.purpose = plan.plan.check.purpose;
    s.utc_us = utc_us;
    if (!plan.jig->scenario.empty())
      if (const auto read = read_source(plan.jig->scenario); read.ok())
        s.documents.push_back({"scenario", plan.jig->scenario, read.value()->text});
    return s;
  }

  const Told& told_;
  const StationFile& station_;
  asio::io_context io_{1};
  std::unique_ptr<Clock> clock_;
  std::unique_ptr<Bench> bench_;
  std::unique_ptr<Watcher> watcher_;
  std::unique_ptr<Person> person_;
  std::unique_ptr<Recorder> recorder_;
  std::unique_ptr<Trials> trials_;
  asio::signal_set signals_;
  Outcomes out_;
};

std::string what_failed(const std::vector<CheckedPart>& parts) {
  std::string out;
  for (const CheckedPart& part : parts)
    if (part.says.verdict != PartVerdict::met && !part.says.why.empty())
      out += (out.empty() ? "" : "; ") + part.plan->plan.id + ": " + part.says.why;
  return out.empty() ? "not all parts were tried" : out;
}

/// The act, and the boards that it holds.
Result<std::vector<std::string>> record(const Outcomes& check, const Told& told, const StationFile& station,
                                        Store& store) {
  const auto& parts = check.parts;
  const PartVerdict verdict = verdict_of(parts);
  ActRecord act;
  act.kind = "jig-check";
  act.at_us = utc_us();
  act.station = station.name;
  act.who = told.operator_name;
  act.about = parts.front().plan->jig->name;
  act.reason = verdict == PartVerdict::met ? "ok" : what_failed(parts);
  act.values = check.uuids;
  act.values["result"] = word(verdict);
  act.values["nest"] = std::to_string(told.nest);
  return write_jig_check(
      store.database(), store.uuids(), act,
      fmt::format("tried since the last good check of {}; the check failed: {}", act.about, act.reason));
}

int code_of(const Outcomes& check) {
  if (check.store_failed) return exit_store;
  const PartVerdict verdict = verdict_of(check.parts);
  if (verdict == PartVerdict::failed) return exit_no_go;
  if (check.stopped) return exit_stopped;
  return verdict == PartVerdict::met ? exit_go : exit_void;
}

void tell_held(const std::vector<std::string>& held) {
  if (held.empty()) return;
  constexpr std::size_t most = 4;
  std::string some;
  for (std::size_t i = 0; i < held.size() && i < most; ++i) some += (i == 0 ? "" : ", ") + printable(held[i]);
  if (held.size() > most) some += fmt::format(" and {} more", held.size() - most);
  fmt::print("{} board{} tried since the last good check {} held: {}\n", held.size(), held.size() == 1 ? "" : "s",
             held.size() == 1 ? "is" : "are", some);
}

Result<std::vector<std::pair<std::string, std::string>>> split(const std::vector<std::string>& words) {
  std::vector<std::pair<std::string, std::string>> out;
  for (const std::string& word : words) {
    const auto at = word.find('=');
    if (at == std::string::npos || at == 0)
      return Error{Error::Kind::usage, fmt::format("\"{}\" is no answer", printable(word)), "--answer",
                   "write PLAN-ID=yes, as in --answer check-copper=yes"};
    out.emplace_back(word.substr(0, at), word.substr(at + 1));
  }
  return out;
}

int jig_check(const Told& told, const StationFile& station, const std::string& store_path) {
  auto answers = split(told.answers);
  if (!answers.ok()) return fail(answers.error());
  Faults faults;
  const CheckPlans plans = read_check_plans(told.plan, faults);
  std::shared_ptr<const Scenario> scenario;
  if (!plans.empty()) scenario = read_scenario(*plans.front()->jig, faults);
  if (!scenario) {
    fmt::print(stderr, "{}{} faults: no relay moved\n", render(faults), faults.count(Severity::fault));
    return exit_files;
  }
  if (const auto words = check_fault_words(*plans.front()->jig, told.faults); !words.ok()) return fail(words.error());
  if (told.nest > plans.front()->jig->nests)
    return fail({Error::Kind::usage, fmt::format("the jig has no nest {}", told.nest), "--nest",
                 fmt::format("its nests count from 1 to {}", plans.front()->jig->nests)});
  StoreOptions how;
  how.backups = station.backups;
  auto store = Store::open(store_path, how);
  if (!store.ok()) return fail(store.error());
  tell(store.value()->notice());
  // The recorder's thread is done with the store before the act is written.
  const Outcomes check = Check(told, station, plans, scenario, std::move(answers.value()), *store.value()).play();
  const auto held = record(check, told, station, *store.value());
  fmt::print("{}", render(check.parts, untold(plans)));
  if (held.ok()) tell_held(held.value());
  store.value()->finish_upkeep();
  for (const std::string& news : store.value()->take_news()) tell(news);
  return held.ok() ? code_of(check) : fail(held.error());
}

}  // namespace

struct JigCheckCommand::Words {
  CLI::App* app{};
  Told told;
};

JigCheckCommand::JigCheckCommand(CLI::App& app) : words_(std::make_unique<Words>()) {
  Told& told = words_->told;
  words_->app = app.add_subcommand("jig-check", "The jig proves itself: relays, zeros, loads, source, known boards");
  words_->app->add_option("PLAN", told.plan, "plan of the first part; it names the next")->required();
  words_->app->add_option("--nest", told.nest, "which nest of the jig (default: 1)")->check(CLI::PositiveNumber);
  words_->app->add_option("--operator", told.operator_name, "who checks, for the record");
  words_->app->add_option("--answer", told.answers, "PLAN-ID=yes: that part's thing lies in the nest")
      ->allow_extra_args(false);
  words_->app->add_flag("--yes", told.yes, "everything lies where it is asked for");
  words_->app->add_option("--fault", told.faults, "a fault of the simulated jig; `jigwright faults` lists them")
      ->allow_extra_args(false);
  words_->app->add_option("--seed", told.seed, "seed of the simulated jig");
}

JigCheckCommand::~JigCheckCommand() = default;

std::optional<int> JigCheckCommand::run(const StationFile& station, const std::string& store,
                                        const std::string& program) {
  if (!*words_->app) return std::nullopt;
  words_->told.program = program;
  return jig_check(words_->told, station, store);
}

}  // namespace jigwright
