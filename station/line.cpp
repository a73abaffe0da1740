// `jigwright line`: the operator's loop. The conversation is LineSession's; here are its host, the store's two sides,
// the jig, and what comes from scanner and keyboard.
#include <fmt/format.h>
#include <unistd.h>

#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <boost/asio/posix/stream_descriptor.hpp>
#include <boost/asio/read_until.hpp>
#include <boost/asio/redirect_error.hpp>
#include <boost/asio/signal_set.hpp>
#include <boost/asio/streambuf.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <csignal>
#include <deque>
#include <fstream>
#include <istream>

#include "db/digest.hpp"
#include "db/sqlite.hpp"
#include "db/store.hpp"
#include "db/week.hpp"
#include "fixtures/simulated/simulated_bench.hpp"
#include "sequencer/trial.hpp"
#include "station/cards.hpp"
#include "station/commands.hpp"
#include "station/exit_codes.hpp"
#include "station/fail.hpp"
#include "station/line_screen.hpp"
#include "station/line_session.hpp"

namespace jigwright {
namespace {

using Await = asio::use_awaitable_t<Exec>;

class Line final : public LineHost, public Observer, public Person {
 public:
  Line(const LineOptions& options, const Texts& texts, std::shared_ptr<const ReadyPlan> plan,
       std::shared_ptr<const Scenario> scenario, Store& writer, Store& reader)
      : options_(options),
        plan_(std::move(plan)),
        writer_(writer),
        reader_(reader.database()),
        clock_(options.virtual_time ? make_virtual_clock() : make_real_clock(io_)),
        bench_(make_simulated_bench(plan_->jig, std::move(scenario), *clock_,
                                    SimulatedOptions(options.seed, options.faults))),
        recorder_(make_recorder(writer, *clock_, io_)),
        screen_(::isatty(STDOUT_FILENO) == 1 ? make_terminal_screen(stdout) : make_plain_screen(stdout)),
        session_(*this, texts, {*plan_, options.station_name, options.order}),
        input_(io_),
        signals_(io_, SIGINT, SIGTERM, SIGHUP) {
    std::signal(SIGPIPE, SIG_IGN);
    files_ = {plan_->plan.source->text, plan_->jig->source_text->text, plan_->limits.source->text};
  }

  int run() {
    wait_for_scan();
    make_trials();
    input_.assign(::dup(STDIN_FILENO));
    signals_.async_wait([this](const boost::system::error_code& fault, int) {
      if (fault) return;
      if (trials_) trials_->stop("stopped at the station (Ctrl-C, or a request to end)");
      quit();
    });
    session_.begin();
    asio::co_spawn(io_, listen(), asio::detached);
    clock_->run(io_);
    recorder_.reset();  // waits for the store's thread
    screen_.reset();
    return failed_ ? exit_store : exit_go;
  }

  // --- LineHost ----------------------------------------------------------------------------------------------------

  std::int64_t now_us() override { return utc_us(); }
  BoardNow board(const std::string& serial) override { return answer(board_now(reader_, serial), BoardNow{}); }
  bool reel_known(const std::string& label) override { return answer(is_reel(reader_, label), false); }
  OrderCounts order(const std::string& name) override {
    if (!counts_ || counts_of_ != name) counts_ = answer(order_counts(reader_, name), OrderCounts{});
    counts_of_ = name;
    return *counts_;
  }
  AdoptedNow adopted(const std::string& order) override {
    Transaction reading(reader_, Transaction::Kind::read);
    const auto found = adopted_for(reader_, order);
    return answer(reader_.result(found ? AdoptedNow{true, differing(*found, files_), found->number} : AdoptedNow{}),
                  AdoptedNow{});
  }
  std::optional<PersonNow> person(const std::string& badge_or_name) override {
    Transaction reading(reader_, Transaction::Kind::read);
    const auto bearer = person_of_badge(reader_, badge_or_name);
    return bearer ? bearer : person_of(reader_, badge_or_name);
  }
  bool anybody_registered() override {
    Transaction reading(reader_, Transaction::Kind::read);
    return !all_people(reader_).empty();
  }
  bool password_fits(const PersonNow& person, const std::string& password) override {
    return jigwright::password_fits(person, password);
  }
  std::optional<std::int64_t> unapproved(const std::string& order) override {
    return answer(unapproved_boards(reader_, order, files_), std::optional<std::int64_t>());
  }
  std::string stop_in_force() override {
    return answer(jigwright::stop_in_force(reader_, options_.station_name), std::string());
  }

  void start_trial(const std::string& serial, const std::string& order) override {
    idle_.reset();
    trying_ = true;
    asio::co_spawn(io_, trial(serial, order), asio::detached);
  }
  void abort_trial() override { trials_->stop("aborted at the line"); }

  void record(const ActRecord& act) override {
    ActRecord with = act;
    if (act.kind == "approve")
      with.values = {
          {"plan", hex(sha256(files_.plan))}, {"jig", hex(sha256(files_.jig))}, {"limits", hex(sha256(files_.limits))}};
    ++writing_;
    asio::co_spawn(io_, write(std::move(with)), asio::detached);
  }
  void change_reel(const FeedChange& change) override {
    ++writing_;
    asio::co_spawn(io_, change_feed(change), asio::detached);
  }

  std::string hand_over(const std::string& sheet) override {
    std::string at = utc_text(utc_us());
    std::erase(at, ':');
    const std::string path = options_.store + ".hand-over-" + at + ".txt";
    std::ofstream(path) << sheet;
    if (::isatty(STDOUT_FILENO) == 0) fmt::print("{}", sheet);
    return path;
  }
  void show(const LineView& view) override {
    if (screen_) screen_->show(view);
  }
  void quit() override {
    ended_ = true;
    if (trying_ || writing_ > 0) return;
    idle_.reset();
    input_.cancel();
    signals_.cancel();
  }

  // --- Observer ----------------------------------------------------------------------------------------------------

  void trial_started(int, const TrialStart&) override {}
  void setting_started(const Progress& progress, const std::string& step, const Setting&) override {
    const auto now = std::chrono::steady_clock::now();
    if (now < next_shown_) return;
    next_shown_ = now + std::chrono::milliseconds(200);
    session_.progress(progress, step);
  }
  void reading(const Progress&, const Setting&, const Reading&) override {}
  void finding(int, const Metric&, const Limit*, const Judged&) override {}
  void trial_ended(int, const TrialStart& start, const TrialEnd& end, const std::string& next_action,
                   const Error* record_fault) override {
    counts_.reset();
    failed_ = failed_ || record_fault != nullptr;
    session_.trial_ended(start, end, next_action, record_fault);
  }
  void notice(int, const std::string&) override {}

  // --- Person ------------------------------------------------------------------------------------------------------

  Task<Result<Reading>> ask(int, const Ask& question, Duration) override {
    co_return Error{
        Error::Kind::person, fmt::format("nobody answered \"{}\"", question.question), "step " + question.step, {}};
  }

 private:
  void make_trials() {
    TrialSetup setup;
    setup.station = options_.station_name;
    setup.program = options_.program;
    setup.origin = Origin::simulated;
    setup.utc_us = utc_us;
    if (!plan_->jig->scenario.empty())
      if (const auto text = read_source(plan_->jig->scenario); text.ok())
        setup.documents.push_back({"scenario", plan_->jig->scenario, text.value()->text});
    trials_ = std::make_unique<Trials>(io_, *bench_, plan_, *this, *this, *recorder_, std::move(setup));
  }

  /// Virtual time stands still while nobody has scanned anything.
  void wait_for_scan() { idle_.emplace(*clock_); }

  template <class T>
  T answer(Result<T> result, T otherwise) {
    if (result.ok()) return std::move(result.value());
    session_.record_failed(result.error());
    return otherwise;
  }

  Task<void> listen() {
    while (!ended_) {
      boost::system::error_code fault;
      const Await token{};
      co_await asio::async_read_until(input_, buffer_, '\n', asio::redirect_error(token, fault));
      std::istream in(&buffer_);
      std::string line;
      std::getline(in, line);
      if (fault && line.empty()) break;
      waiting_.push_back(std::move(line));
      take_waiting();
    }
    closed_ = true;
    take_waiting();
  }

  /// A scan in virtual time waits for the trial before it: a file of scans plays a whole shift.
  void take_waiting() {
    const auto busy = [this] { return options_.virtual_time && (trying_ || writing_ > 0); };
    while (!waiting_.empty() && !ended_ && !busy()) {
      const std::string line = std::move(waiting_.front());
      waiting_.pop_front();
      session_.take(line);
    }
    if (closed_ && waiting_.empty() && !ended_) quit();
  }

  Task<void> trial(std::string serial, std::string order) {
    trials_->sign(session_.who());
    const TrialResult result = co_await trials_->run(1, std::move(serial), std::move(order));
    trying_ = false;
    if (trials_->stopped()) make_trials();
    wait_for_scan();
    ended_ ? quit() : take_waiting();
  }

  Task<void> write(ActRecord act) {
    const auto done = co_await recorder_->write([this, &act]() -> Result<Done> {
      const auto written = write_act(writer_.database(), writer_.uuids(), act);
      return written.ok() ? Result<Done>(Done{}) : Result<Done>(written.error());
    });
    --writing_;
    if (ended_) quit();
    counts_.reset();
    failed_ = failed_ || !done.ok();
    if (!done.ok()) session_.record_failed(done.error());
    take_waiting();
  }

  Task<void> change_feed(FeedChange change) {
    std::optional<Result<FeedChanged>> changed;
    const auto done = co_await recorder_->write([this, &change, &changed]() -> Result<Done> {
      changed.emplace(jigwright::change_reel(writer_.database(), writer_.uuids(), change));
      return Done{};
    });
    --writing_;
    if (ended_) quit();
    session_.reel_changed(*changed);
    take_waiting();
  }

  const LineOptions& options_;
  std::shared_ptr<const ReadyPlan> plan_;
  RevisionFiles files_;
  Store& writer_;
  Database& reader_;
  asio::io_context io_{1};
  std::unique_ptr<Clock> clock_;
  std::unique_ptr<Bench> bench_;
  std::unique_ptr<Recorder> recorder_;
  std::unique_ptr<Trials> trials_;
  std::unique_ptr<LineScreen> screen_;
  LineSession session_;
  asio::posix::basic_stream_descriptor<Exec> input_;
  asio::signal_set signals_;
  asio::streambuf buffer_{65536};
  std::optional<Clock::Hold> idle_;
  std::optional<OrderCounts> counts_;
  std::string counts_of_;
  std::chrono::steady_clock::time_point next_shown_;
  std::deque<std::string> waiting_;
  int writing_{0};
  bool trying_{false}, closed_{false}, ended_{false}, failed_{false};
};

}  // namespace

int line(const LineOptions& options) {
  const auto texts = Texts::of(options.language);
  if (!texts.ok()) return fail(texts.error());
  Faults faults;
  const auto plan = read_plan(options.plan, faults);
  std::shared_ptr<const Scenario> scenario;
  if (plan) scenario = read_scenario(*plan->jig, faults);
  if (!scenario) {
    fmt::print(stderr, "{}{} faults: no relay moved\n", render(faults), faults.count(Severity::fault));
    return exit_files;
  }
  if (const auto words = check_fault_words(*plan->jig, options.faults); !words.ok()) return fail(words.error());
  StoreOptions writing;
  writing.backups = options.backups;
  const auto writer = Store::open(options.store, writing);
  if (!writer.ok()) return fail(writer.error());
  tell(writer.value()->notice());
  StoreOptions reading;
  reading.access = StoreOptions::Access::read;
  const auto reader = Store::open(options.store, reading);
  if (!reader.ok()) return fail(reader.error());
  if (const auto taken = writer.value()->take_station(options.station_name); !taken.ok()) return fail(taken.error());
  int code = exit_fault;
  {
    Line line(options, texts.value(), plan, scenario, *writer.value(), *reader.value());
    code = line.run();
  }
  writer.value()->finish_upkeep();
  for (const std::string& news : writer.value()->take_news()) tell(news);
  return code;
}

int cards(const CardsOptions& options) {
  const auto texts = Texts::of(options.language);
  if (!texts.ok()) return fail(texts.error());
  const auto sheet = card_sheet(texts.value());
  if (!sheet.ok()) return fail(sheet.error());
  if (options.file.empty() || options.file == "-") {
    fmt::print("{}", sheet.value());
    return exit_go;
  }
  std::ofstream out(options.file);
  out << sheet.value();
  out.close();
  if (!out)
    return fail({Error::Kind::usage, "the sheet can't be written", options.file, "check the path and the disk"});
  fmt::print("{}: print it on A4 at full size.\n", options.file);
  return exit_go;
}

}  // namespace jigwright
