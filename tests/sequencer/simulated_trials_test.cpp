// Whole trials of the sample's plan B on the simulated jig: what its faults lead to, and several nests on one meter.
#include <doctest/doctest.h>

#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <cmath>
#include <map>

#include "sample_trials.hpp"

using namespace jigwright;
using namespace jigwright::test;

namespace {

/// Keeps nothing, and fails where told.
struct FailingRecorder final : Recorder {
  bool begin_fails{false}, finish_fails{false};
  int begun{0};
  static Error full() { return {Error::Kind::store, "the disk is full", "results.db", {}}; }
  Task<Result<Done>> write(std::function<Result<Done>()>) override { co_return Done{}; }
  Task<Result<OpenTrial>> begin(const TrialStart&) override {
    ++begun;
    if (begin_fails) co_return full();
    co_return OpenTrial{};
  }
  Task<Result<Done>> finish(const OpenTrial&, const TrialEnd&) override {
    if (finish_fails) co_return full();
    co_return Done{};
  }
};

/// Ends all trials when the n-th setting begins.
struct StopAt final : Silent {
  Trials* trials{nullptr};
  int at{0}, seen{0};
  void setting_started(const Progress&, const std::string&, const Setting&) override {
    if (++seen == at) trials->stop("stopped at the station");
  }
};

/// One sound board with a recorder and a watcher of the test's own.
TrialResult try_with(Recorder& recorder, Silent& watcher, StopAt* stop = nullptr) {
  asio::io_context io{1};
  const auto clock = make_virtual_clock();
  const SimulatedOptions options;
  const auto bench = make_simulated_bench(plan_b()->jig, scenario(), *clock, options);
  Nobody nobody;
  TrialSetup setup;
  setup.origin = Origin::simulated;
  Trials trials(io, *bench, plan_b(), watcher, nobody, recorder, setup);
  if (stop != nullptr) stop->trials = &trials;
  std::optional<TrialResult> out;
  auto one = [&]() -> Task<void> { out.emplace(co_await trials.run(1, "TB3-0001", "WO-1041")); };
  asio::co_spawn(io, one(), asio::detached);
  clock->run(io);
  REQUIRE(out.has_value());
  return std::move(*out);
}

struct Tried {
  std::map<std::string, TrialResult> of;  ///< by serial
  bool relays_open{true};
};

Tried try_boards(const std::shared_ptr<const ReadyPlan>& plan, const std::vector<std::string>& serials,
                 std::vector<std::string> faults) {
  Tried out;
  asio::io_context io{1};
  const auto clock = make_virtual_clock();
  const SimulatedOptions options(1, std::move(faults));
  const auto bench = make_simulated_bench(plan->jig, scenario(), *clock, options);
  const auto recorder = make_null_recorder();
  Silent silent;
  Nobody nobody;
  TrialSetup setup;
  setup.origin = Origin::simulated;
  Trials trials(io, *bench, plan, silent, nobody, *recorder, setup);
  std::size_t next = 0;
  auto loop = [&](int nest) -> Task<void> {
    while (next < serials.size()) {
      std::string serial = serials[next++];
      TrialResult result = co_await trials.run(nest, serial, "WO-1041");
      out.of.emplace(serial, std::move(result));
    }
  };
  for (int nest = 1; nest <= plan->jig->nests; ++nest) asio::co_spawn(io, loop(nest), asio::detached);
  clock->run(io);
  return out;
}

TrialResult try_one(std::vector<std::string> faults, const std::string& serial = "TB3-0001") {
  Tried tried = try_boards(plan_b(), {serial}, std::move(faults));
  return std::move(tried.of.at(serial));
}

Judgement judgement(const TrialResult& r) {
  return r.end.outcome.judgement;
}

}  // namespace

TEST_CASE("a sound board is GO, every limited metric met, and the safe state confirmed") {
  const TrialResult r = try_one({});
  CHECK_MESSAGE(judgement(r) == Judgement::go, r.end.outcome.void_reason);
  CHECK(r.end.safe_state.empty());
  for (const FindingRow& row : r.end.findings)
    if (row.limit) CHECK_MESSAGE(row.judged.verdict == Verdict::met, label(row.metric.name));
}

TEST_CASE("an empty nest is VOID") {
  CHECK(judgement(try_one({"empty-nest"})) == Judgement::void_);
}

TEST_CASE("any single open pin of any probe is VOID before power") {
  for (const Probe& probe : plan_b()->jig->probes)
    for (const char* word : {"probe-open:", "probe-force-open:", "probe-sense-open:"}) {
      CAPTURE(word + probe.id);
      const TrialResult r = try_one({word + probe.id});
      CHECK(judgement(r) == Judgement::void_);
      for (const FindingRow& row : r.end.findings)
        if (row.metric.name.name == "rail") CHECK(row.judged.finding.state == FindingState::skipped);
    }
}

TEST_CASE("a missing load, a welded or an open load relay is VOID before power") {
  std::vector<std::string> words;
  for (const Load& load : plan_b()->jig->loads) words.push_back("load-missing:" + load.id);
  for (const Load& load : plan_b()->jig->loads) words.push_back("load-off:" + load.id);
  for (const Relay& relay : plan_b()->jig->relays) {
    if (relay.role != Role::load) continue;
    words.push_back("relay-welded:" + relay.id);
    words.push_back("relay-open:" + relay.id);
  }
  for (const std::string& word : words) {
    CAPTURE(word);
    CHECK(judgement(try_one({word})) == Judgement::void_);
  }
}

TEST_CASE("no relay of a path that the plan reads leads to GO when it is stuck open or closed") {
  // The others change no reading that this plan could tell from a right one (an open zero path reads about 0 V, an
  // unused swap relay nothing): the jig's own check is for those.
  const auto seen_by_plan = [](Role role) {
    switch (role) {
      case Role::probe_loop:
      case Role::meter_to_output:
      case Role::meter_to_input:
      case Role::meter_to_rail_pos:
      case Role::meter_to_rail_neg:
      case Role::meter_to_identity:
      case Role::meter_to_reference:
      case Role::input_short:
      case Role::range:
      case Role::load:
        return true;
      default:
        return false;
    }
  };
  for (const Relay& relay : plan_b()->jig->relays) {
    if (!seen_by_plan(relay.role)) continue;
    for (const char* word : {"relay-welded:", "relay-open:"}) {
      CAPTURE(word + relay.id);
      CAPTURE(role_name(relay.role));
      CHECK(judgement(try_one({word + relay.id})) != Judgement::go);
    }
  }
}

TEST_CASE("an open relay between meter and board is the jig's fault, not the board's") {
  for (const Role role : {Role::meter_to_output, Role::meter_to_input, Role::input_short}) {
    const RelaySet set = plan_b()->jig->relays_of(role);
    for (std::size_t i = 0; i < plan_b()->jig->relays.size(); ++i) {
      if (!set[i]) continue;
      const TrialResult r = try_one({"relay-open:" + plan_b()->jig->relays[i].id});
      CAPTURE(plan_b()->jig->relays[i].id);
      CHECK(judgement(r) == Judgement::void_);
    }
  }
}

TEST_CASE("faults of board and instruments lead to what the rules say") {
  CHECK(judgement(try_one({"rail-short"})) == Judgement::no_go);
  CHECK(judgement(try_one({"rail-low"})) == Judgement::no_go);
  CHECK(judgement(try_one({"output-at-rail"})) == Judgement::no_go);
  CHECK(judgement(try_one({"output-dead"})) == Judgement::no_go);
  for (const char* word : {"meter-wrong", "meter-stuck", "meter-silent", "relays-silent", "source-silent",
                           "supply-silent", "detector-silent", "lid-open"}) {
    CAPTURE(word);
    CHECK(judgement(try_one({word})) == Judgement::void_);
  }
  CHECK(judgement(try_one({"source-off"})) != Judgement::go);
}

TEST_CASE("an instrument that falls silent, or a lid that opens, at any moment is VOID and the nest is safe or named") {
  for (const char* word : {"meter-silent-after=", "relays-silent-after=", "detector-silent-after=", "lid-open-after="})
    for (int n = 1; n < 120; n += 9) {
      const std::string fault = word + std::to_string(n);
      CAPTURE(fault);
      const TrialResult r = try_one({fault});
      if (judgement(r) == Judgement::go)
        CHECK(n > 20);  // fewer calls than that in a trial: then the fault never came
      else
        CHECK(judgement(r) == Judgement::void_);
      if (std::string(word).starts_with("relays") && judgement(r) != Judgement::go)
        CHECK_FALSE(r.end.safe_state.empty());
    }
}

TEST_CASE("three nests on one meter find what each board alone would") {
  const std::vector<std::string> serials{"TB3-0001", "TB3-0180", "TB3-0100", "TB3-0185", "TB3-0002"};
  const Tried alone = try_boards(plan_b(), serials, {});
  const auto three = with_nests(3);
  const Tried together = try_boards(three, serials, {});
  for (const std::string& serial : serials) {
    CAPTURE(serial);
    const TrialResult& a = alone.of.at(serial);
    const TrialResult& b = together.of.at(serial);
    CHECK(judgement(a) == judgement(b));
    REQUIRE(a.end.findings.size() == b.end.findings.size());
    for (std::size_t i = 0; i < a.end.findings.size(); ++i) {
      const FindingRow& x = a.end.findings[i];
      const FindingRow& y = b.end.findings[i];
      CAPTURE(label(x.metric.name));
      CHECK(x.judged.verdict == y.judged.verdict);
      if (x.judged.finding.state != FindingState::measured || x.metric.name.name == "path_zero_age") continue;
      // Within what each states: waits differ, so drift and noise do.
      const double u = std::hypot(x.judged.finding.u, y.judged.finding.u);
      CHECK(std::abs(x.judged.finding.value - y.judged.finding.value) <= 3 * u);
    }
  }
}

TEST_CASE("one nest's trouble stays its own") {
  const auto three = with_nests(3);
  const Tried tried = try_boards(three, {"TB3-0001", "TB3-0188", "TB3-0003"}, {});
  CHECK(judgement(tried.of.at("TB3-0001")) == Judgement::go);
  CHECK(judgement(tried.of.at("TB3-0188")) == Judgement::no_go);
  CHECK(judgement(tried.of.at("TB3-0003")) == Judgement::go);
}

TEST_CASE("a trial whose start can't be recorded is not begun") {
  FailingRecorder recorder;
  recorder.begin_fails = true;
  StopAt counting;
  const TrialResult r = try_with(recorder, counting);
  CHECK(judgement(r) == Judgement::void_);
  CHECK_FALSE(r.recorded);
  CHECK(counting.seen == 0);
}

TEST_CASE("a sound board whose record can't be made durable is VOID, never GO") {
  FailingRecorder recorder;
  recorder.finish_fails = true;
  Silent silent;
  const TrialResult r = try_with(recorder, silent);
  CHECK(judgement(r) == Judgement::void_);
  CHECK_FALSE(r.recorded);
  CHECK(r.end.outcome.void_reason.find("the disk is full") != std::string::npos);
}

TEST_CASE("a stop at any setting is VOID with the reason, and the safe state is confirmed") {
  const int settings = static_cast<int>(plan_b()->full.settings.size());
  for (int at = 1; at < settings - 5; at += 7) {
    CAPTURE(at);
    FailingRecorder recorder;
    StopAt watcher;
    watcher.at = at;
    const TrialResult r = try_with(recorder, watcher, &watcher);
    CHECK(judgement(r) == Judgement::void_);
    CHECK(r.end.outcome.void_reason.find("stopped at the station") != std::string::npos);
    CHECK(r.end.safe_state.empty());
    CHECK(r.recorded);
  }
}

TEST_CASE("stored readings give every finding and the judgement again, to the last bit") {
  struct Case {
    const char* serial;
    std::vector<std::string> faults;
  };
  for (const Case& c : {Case{"TB3-0001", {}}, Case{"TB3-0180", {}}, Case{"TB3-0001", {"output-at-rail"}},
                        Case{"TB3-0001", {"load-missing:1 nF"}}, Case{"TB3-0001", {"probe-open:OUT"}}}) {
    const std::string first_fault = c.faults.empty() ? "" : c.faults.front();
    CAPTURE(first_fault);
    const TrialResult played = try_one(c.faults, c.serial);
    const auto stored = decode_readings(played.end.readings);
    REQUIRE(stored.ok());
    // The plan is expanded again, as a later program would.
    const auto plan = with_nests(1);
    const auto again = replay(*plan, stored.value(), Ended{});
    REQUIRE(again.ok());
    CHECK(again.value().outcome().judgement == judgement(played));
    const std::vector<FindingRow> rows = again.value().rows();
    REQUIRE(rows.size() == played.end.findings.size());
    for (std::size_t i = 0; i < rows.size(); ++i) {
      CAPTURE(label(rows[i].metric.name));
      const Judged& a = played.end.findings[i].judged;
      const Judged& b = rows[i].judged;
      CHECK(rows[i].metric.name == played.end.findings[i].metric.name);
      CHECK(a.verdict == b.verdict);
      CHECK(a.finding.state == b.finding.state);
      CHECK(a.finding.n == b.finding.n);
      CHECK((a.finding.value == b.finding.value || (std::isnan(a.finding.value) && std::isnan(b.finding.value))));
      CHECK((a.finding.u == b.finding.u || (std::isnan(a.finding.u) && std::isnan(b.finding.u))));
    }
  }
}

TEST_CASE("an output beyond the meter is a miss where the meter has just read its known value right") {
  const TrialResult r = try_one({"output-at-rail"});
  CHECK(judgement(r) == Judgement::no_go);
  bool over_range_missed = false, known_value_read = false;
  for (const FindingRow& row : r.end.findings) {
    over_range_missed = over_range_missed ||
                        (row.judged.finding.state == FindingState::over_range && row.judged.verdict == Verdict::missed);
    known_value_read =
        known_value_read || (row.metric.name.name == "known_value" && row.judged.verdict == Verdict::met);
  }
  CHECK(over_range_missed);
  CHECK(known_value_read);
}

TEST_CASE("readings of another plan are refused") {
  const TrialResult played = try_one({});
  const auto stored = decode_readings(played.end.readings);
  REQUIRE(stored.ok());
  Faults faults;
  const auto plan_a = read_plan(SOURCE_FOLDER "/sample-runs/plan-a.toml", faults);
  REQUIRE(plan_a);
  CHECK_FALSE(replay(*plan_a, stored.value(), Ended{}).ok());
}

TEST_CASE("a plan that stops at the first miss plays nothing after it, and what was not read is no evidence") {
  const auto plan = with_nests(1);
  plan->plan.stop_at_first_miss = true;
  Tried tried = try_boards(plan, {"TB3-0001"}, {"rail-low"});
  const TrialResult& r = tried.of.at("TB3-0001");
  CHECK(judgement(r) == Judgement::no_go);
  for (const FindingRow& row : r.end.findings) {
    if (row.metric.name.step != "gain" && row.metric.name.name != "load_delta") continue;
    CHECK(row.judged.finding.state == FindingState::skipped);
    CHECK(row.judged.verdict == Verdict::no_evidence);
  }
  // The same board without that option is read to the end.
  const TrialResult whole = try_one({"rail-low"});
  for (const FindingRow& row : whole.end.findings)
    if (row.metric.name.name == "load_delta") CHECK(row.judged.finding.state == FindingState::measured);
}

TEST_CASE("a trial longer than its plan allows is VOID and says so") {
  const auto plan = with_nests(1);
  plan->plan.time_limit_s = 3;
  Tried tried = try_boards(plan, {"TB3-0001"}, {});
  const TrialResult& r = tried.of.at("TB3-0001");
  CHECK(judgement(r) == Judgement::void_);
  CHECK(r.end.outcome.void_reason.find("took longer than 3 s") != std::string::npos);
}
