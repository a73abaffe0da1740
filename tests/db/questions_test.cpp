#include "db/questions.hpp"

#include <sqlite3.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdio>
#include <map>
#include <random>
#include <set>

#include "db/sqlite.hpp"
#include "tests/db/room.hpp"

using namespace jigwright;
using room::must;

namespace {

void enter(Store& store, const std::string& text) {
  Faults faults;
  must(store.enter({std::make_shared<SourceText>(SourceText{"t.csv", text})}, room::noon_us, faults));
  REQUIRE(render(faults) == "");
}

/// Three boards of WO-1; R-1 then R-2 at U7 with a change known between boards 2 and 3 only; R-1 at R12 throughout.
std::unique_ptr<Store> small() {
  auto store = room::memory();
  enter(*store,
        "order,build_no,serial,panel,product\nWO-1,1,TB-01,P1,amplifier\nWO-1,2,TB-02,P1,amplifier\n"
        "WO-1,3,TB-03,P2,amplifier\n");
  enter(*store,
        "reel,maker,part,lot,date_code,distributor,rereeled,quantity,marking\n"
        "R-1,Alder Works,AW1,A-77,2431,Pier Parts,no,100,AW\nR-2,Birch Works,BW1,B-12,,,,,\n");
  enter(*store,
        "order,designator,reel,possible_from,from,to,possible_to\nWO-1,U7,R-1,1,1,1,2\nWO-1,U7,R-2,2,3,3,3\n"
        "WO-1,U10,R-1,1,1,3,3\n");
  return store;
}

using Place = std::tuple<std::string, std::string, bool>;  // designator or serial, reel or designator, certain

std::set<Place> places(const SerialTrace& trace) {
  std::set<Place> out;
  for (const Carried& c : trace.reels) out.insert({c.designator, c.reel.reel, c.certain});
  return out;
}

/// What the shell prints, line by line.
std::vector<std::string> shell(const std::string& database, const std::string& sql) {
  const std::string command = "sqlite3 -readonly '" + database + "' \"" + sql + "\" 2>&1";
  std::FILE* pipe = popen(command.c_str(), "r");
  REQUIRE(pipe != nullptr);
  std::vector<std::string> out;
  std::array<char, 4096> line{};
  while (std::fgets(line.data(), static_cast<int>(line.size()), pipe) != nullptr) {
    out.emplace_back(line.data());
    out.back().erase(out.back().find_last_not_of("\r\n") + 1);
  }
  pclose(pipe);
  return out;
}

bool has_shell() {
  return std::system("command -v sqlite3 >/dev/null 2>&1") == 0;
}

}  // namespace

TEST_CASE("a serial's reels, by designator as people count, certain before possible") {
  const auto store = small();
  const SerialTrace trace = must(store->trace_serial("TB-02"));
  CHECK(trace.board.order == "WO-1");
  CHECK(trace.board.build_no == 2);
  CHECK(trace.board.product == "amplifier");
  CHECK(!trace.board.judgement);
  REQUIRE(trace.reels.size() == 3);
  CHECK(trace.reels[0].designator == "U7");
  CHECK(trace.reels[0].reel.reel == "R-1");
  CHECK(!trace.reels[0].certain);
  CHECK(trace.reels[1].reel.reel == "R-2");
  CHECK(!trace.reels[1].certain);
  CHECK(trace.reels[2].designator == "U10");
  CHECK(trace.reels[2].certain);
  CHECK(trace.reels[2].reel.maker == "Alder Works");
  CHECK(trace.reels[2].reel.date_code == "2024-W31");
  CHECK(trace.reels[2].reel.rereeled == false);
  CHECK(trace.reels[2].reel.quantity == 100);
  CHECK(!trace.reels[1].reel.rereeled);
}

TEST_CASE("a reel's boards with their latest judgement, certain at one designator is certain") {
  const auto store = small();
  room::try_board(*store, "TB-03", Judgement::no_go, room::noon_us);
  room::try_board(*store, "TB-03", Judgement::go, room::noon_us + 60'000'000);
  const ReelTrace trace = must(store->trace_reel("R-1"));
  REQUIRE(trace.boards.size() == 3);
  CHECK(trace.boards[1].board.serial == "TB-02");
  CHECK(trace.boards[1].designators == std::vector<std::string>{"U7", "U10"});
  CHECK(trace.boards[1].certain);
  CHECK(!trace.boards[1].board.judgement);
  CHECK(trace.boards[2].designators == std::vector<std::string>{"U10"});
  CHECK(trace.boards[2].board.judgement == Judgement::no_go);
  CHECK(trace.boards[2].board.at_us == room::noon_us);
  CHECK(trace.boards[2].board.trials == 2);
  const ReelTrace second = must(store->trace_reel("R-2"));
  REQUIRE(second.boards.size() == 2);
  CHECK(!second.boards[0].certain);
  CHECK(second.boards[1].certain);
}

TEST_CASE("show gives back every part of a limit as it was applied") {
  const auto store = room::memory();
  TrialEnd end = room::end(Judgement::go);
  Limit& given = *end.findings[0].limit;
  given.guard = Guard::typed;
  given.share = 0.5;
  given.budget_U = 21e-6;
  given.budget_of_reading = 3e-4;
  given.width = 22e-6;
  given.reason = "typed for a test";
  must(store->finish_trial(must(store->begin_trial(room::start("TB-01"))), end));
  const BoardShown shown = must(store->show("TB-01"));
  const auto& findings = shown.trials[0].findings;
  const auto found = std::find_if(findings.begin(), findings.end(),
                                  [](const ShownFinding& f) { return f.metric.name.variant == "x1"; });
  REQUIRE(found != findings.end());
  REQUIRE(found->limit);
  CHECK(found->limit->guard == Guard::typed);
  CHECK(found->limit->specification.low == -0.5e-3);
  CHECK(found->limit->specification.high == 0.5e-3);
  CHECK(found->limit->nominal == 0);
  CHECK(found->limit->share == 0.5);
  CHECK(found->limit->budget_U == 21e-6);
  CHECK(found->limit->budget_of_reading == 3e-4);
  CHECK(found->limit->width == 22e-6);
  CHECK(found->limit->applied.low == -0.48e-3);
  CHECK(found->limit->applied.high == 0.48e-3);
  CHECK(found->limit->reason == "typed for a test");
  CHECK(found->judged.finding.value == 0.1e-3);
  CHECK(found->judged.finding.u == 4e-6);
  CHECK(found->judged.finding.n == 10);
  CHECK(found->judged.finding.state == FindingState::measured);
  CHECK(found->judged.verdict == Verdict::met);
}

TEST_CASE("a board in no known order is known by its trials") {
  const auto store = room::memory();
  room::try_board(*store, "X-1", Judgement::go);
  const SerialTrace trace = must(store->trace_serial("X-1"));
  CHECK(!trace.board.build_no);
  CHECK(trace.board.judgement == Judgement::go);
  CHECK(trace.reels.empty());
}

TEST_CASE("an unknown name comes back with the nearest known one") {
  const auto store = small();
  const auto serial = store->trace_serial("TB-0l");
  REQUIRE(!serial);
  CHECK(serial.error().kind == Error::Kind::usage);
  CHECK(serial.error().what == "unknown serial \"TB-0l\"");
  CHECK(serial.error().to_do.starts_with("did you mean \"TB-0"));
  CHECK(store->show("BT-01").error().to_do == "did you mean \"TB-01\"?");
  CHECK(store->trace_reel("R-3").error().what == "unknown reel \"R-3\"");
  CHECK(store->trace_reel("Drum").error().to_do == "");
  CHECK(store->trace_serial("R-1").error().what == "\"R-1\" is a reel, not a serial");
  CHECK(store->trace_reel("TB-01").error().what == "\"TB-01\" is a board's serial, not a reel");
}

TEST_CASE("show gives each trial, and its findings by margin, least first") {
  const auto store = small();
  room::try_board(*store, "TB-01", Judgement::no_go, room::noon_us);
  must(store->begin_trial(room::start("TB-01", room::noon_us + 5'000'000)));
  const BoardShown shown = must(store->show("TB-01"));
  REQUIRE(shown.trials.size() == 2);
  const ShownTrial& first = shown.trials[0];
  CHECK(first.judgement == Judgement::no_go);
  CHECK(!first.counts);
  CHECK(first.operator_name == "A. Tester");
  CHECK(first.station == "bench 1");
  CHECK(first.plan == "plan-1");
  CHECK(first.limit_set == "limits-1");
  CHECK(first.limit_revision == 3);
  CHECK(first.took_ms == 2200);
  CHECK(first.deciding == "offset: offset (x1)");
  CHECK(first.missed == 1);
  REQUIRE(first.findings.size() == 3);
  CHECK(first.findings[0].metric.name.variant == "x1");
  CHECK(first.findings[0].judged.verdict == Verdict::missed);
  CHECK(first.findings[0].judged.margin == doctest::Approx((0.48 - 0.6) / 0.48));
  CHECK(first.findings[0].limit->specification.high == 0.5e-3);
  CHECK(first.findings[1].judged.margin == doctest::Approx((0.48 - 0.2) / 0.48));
  CHECK(first.findings[2].metric.name.name == "zero");
  CHECK(first.findings[2].metric.about == About::jig);
  CHECK(!first.findings[2].limit);
  CHECK(std::isnan(first.findings[2].judged.margin));
  const ShownTrial& second = shown.trials[1];
  CHECK(second.open);
  CHECK(second.counts);
  CHECK(second.judgement == Judgement::void_);
  CHECK(second.void_reason == "the program ended in mid-trial");
  CHECK(shown.board.judgement == Judgement::void_);
}

TEST_CASE("no question but one about an unknown name goes over a whole table") {
  const auto store = small();
  room::try_board(*store, "TB-01", Judgement::go);
  must(store->trace_serial("TB-01"));
  must(store->trace_reel("R-1"));
  must(store->show("TB-01"));
  sqlite3* handle = store->database().handle();
  int questions = 0;
  std::vector<std::string> statements;
  for (sqlite3_stmt* s = nullptr; (s = sqlite3_next_stmt(handle, s)) != nullptr;)
    statements.emplace_back(sqlite3_sql(s));
  for (const std::string& sql : statements) {
    if (!sql.starts_with("SELECT") || sql.ends_with("sqlite_schema")) continue;
    ++questions;
    sqlite3_stmt* plan = nullptr;
    REQUIRE(sqlite3_prepare_v2(handle, ("EXPLAIN QUERY PLAN " + sql).c_str(), -1, &plan, nullptr) == SQLITE_OK);
    while (sqlite3_step(plan) == SQLITE_ROW) {
      const std::string step = reinterpret_cast<const char*>(sqlite3_column_text(plan, 3));
      CAPTURE(sql);
      CHECK(step.find("SCAN") == std::string::npos);
    }
    sqlite3_finalize(plan);
  }
  CHECK(questions > 5);
}

// ---- a small random factory and its slow, plain reference

namespace {

struct PlainFeed {
  std::string order, designator, reel;
  int poss_from, cert_from, cert_to, poss_to;
  bool repair;
  int since;
};

struct PlainBoard {
  std::string serial, order;
  int build_no;
};

struct Factory {
  std::vector<PlainBoard> boards;
  std::vector<std::string> reels;
  std::vector<PlainFeed> feeds;
};

/// The reels of a board at their designators: every feed is looked at. A repair drives out all others at its place;
/// of several the latest stays.
std::set<Place> plain_reels(const Factory& factory, const PlainBoard& board) {
  std::map<std::string, const PlainFeed*> repaired;
  for (const PlainFeed& f : factory.feeds) {
    if (!f.repair || f.order != board.order || f.poss_from != board.build_no) continue;
    const PlainFeed*& held = repaired[f.designator];
    if (held == nullptr || held->since < f.since) held = &f;
  }
  std::set<Place> out;
  for (const PlainFeed& f : factory.feeds) {
    if (f.order != board.order || board.build_no < f.poss_from || board.build_no > f.poss_to) continue;
    const auto by = repaired.find(f.designator);
    if (by != repaired.end() && by->second != &f) continue;
    out.insert({f.designator, f.reel, f.cert_from <= board.build_no && board.build_no <= f.cert_to});
  }
  return out;
}

class FactoryMaker {
 public:
  Factory make() {
    for (int r = 0; r < 40; ++r) factory_.reels.push_back("R-" + std::to_string(100 + r));
    for (const char* order : {"WO-1", "WO-2", "WO-3"}) {
      for (int n = 1; n <= last; ++n)
        factory_.boards.push_back({std::string(order) + "-" + std::to_string(n), order, n});
      for (const char* d : {"U1", "U7", "R3", "R12", "C9"}) feed(order, d);
      repairs(order);
    }
    return factory_;
  }

 private:
  static constexpr int last = 60;
  int pick(int low, int high) { return std::uniform_int_distribution(low, high)(random_); }
  std::string reel() { return factory_.reels[static_cast<std::size_t>(next_++) % factory_.reels.size()]; }

  /// Stretches one after the other; a change may be known only within a window, and two feeders may alternate.
  void feed(const std::string& order, const std::string& designator) {
    int from = 1, window = 0;
    while (from <= last) {
      const int to = std::min(last, from + pick(4, 25));
      const int next_window = to == last ? 0 : pick(0, 2);
      if (pick(0, 3) == 0) {
        for (int feeder = 0; feeder < 2; ++feeder)
          factory_.feeds.push_back({order, designator, reel(), from - window, to + 1, from - 1 - window, to, false, 0});
        window = 0;
      } else {
        factory_.feeds.push_back(
            {order, designator, reel(), from - window, from + window, to - next_window, to + next_window, false, 0});
        window = next_window;
      }
      from = to + 1;
    }
  }

  void repairs(const std::string& order) {
    for (int i = 0; i < 8; ++i) {
      const int n = pick(1, last);
      factory_.feeds.push_back({order, "U7", reel(), n, n, n, n, true, i});
    }
  }

  Factory factory_;
  std::mt19937 random_{20260109};
  int next_{0};
};

void stock(Store& store, const Factory& factory) {
  std::string boards = "order,build_no,serial,panel,product\n",
              feeds = "order,designator,reel,possible_from,from,to,possible_to\n",
              reels = "reel,maker,part,lot,date_code,distributor,rereeled,quantity,marking\n";
  for (const PlainBoard& b : factory.boards)
    boards += b.order + "," + std::to_string(b.build_no) + "," + b.serial + ",,\n";
  for (const std::string& r : factory.reels) reels += r + ",Alder Works,AW1,L" + r + ",,,,,\n";
  for (const PlainFeed& f : factory.feeds) {
    if (f.repair) continue;
    const bool certain = f.cert_from <= f.cert_to;
    feeds += f.order + "," + f.designator + "," + f.reel + "," + std::to_string(f.poss_from) + "," +
             (certain ? std::to_string(f.cert_from) : "") + "," + (certain ? std::to_string(f.cert_to) : "") + "," +
             std::to_string(f.poss_to) + "\n";
  }
  enter(store, boards);
  enter(store, reels);
  enter(store, feeds);
  for (const PlainFeed& f : factory.feeds) {
    if (!f.repair) continue;
    const Uuid uuid = store.uuids().next(1);
    store.database().run(
        "INSERT INTO feed(uuid, ord, designator, reel, poss_from, cert_from, cert_to, poss_to, repair, since_us, "
        "known_us) "
        "SELECT ?, o.id, ?, r.id, ?, ?, ?, ?, 1, ?, 0 FROM product_order o, reel r WHERE o.name = ? AND r.name = ?",
        Blob{bytes(uuid)}, f.designator, f.poss_from, f.cert_from, f.cert_to, f.poss_to, f.since, f.order, f.reel);
  }
  REQUIRE(!store.database().failed());
}

}  // namespace

TEST_CASE("traces of a random factory equal those of a slow, plain reference") {
  const Factory factory = FactoryMaker().make();
  const auto store = room::memory();
  stock(*store, factory);
  std::map<std::string, std::set<Place>> by_reel;
  for (const PlainBoard& board : factory.boards) {
    const std::set<Place> expected = plain_reels(factory, board);
    CAPTURE(board.serial);
    CHECK(places(must(store->trace_serial(board.serial))) == expected);
    for (const auto& [designator, reel, certain] : expected) {
      by_reel[reel].insert({board.serial, designator, certain});
    }
  }
  for (const std::string& reel : factory.reels) {
    const ReelTrace trace = must(store->trace_reel(reel));
    std::map<std::string, std::pair<std::set<std::string>, bool>> expected, found;
    for (const auto& [serial, designator, certain] : by_reel[reel]) {
      expected[serial].first.insert(designator);
      expected[serial].second = expected[serial].second || certain;
    }
    for (const Carrier& c : trace.boards)
      found[c.board.serial] = {std::set(c.designators.begin(), c.designators.end()), c.certain};
    CAPTURE(reel);
    CHECK(found == expected);
  }
}

TEST_CASE("the plain sqlite3 shell reads the views") {
  if (!has_shell()) {
    MESSAGE("the sqlite3 shell is not installed: not tried");
    return;
  }
  room::TempFolder folder;
  const std::string path = folder.file("s.db");
  {
    const auto store = room::open(path);
    enter(*store, "order,build_no,serial,panel,product\nWO-1,1,TB-01,P1,amplifier\nWO-1,2,TB-02,P1,amplifier\n");
    enter(*store,
          "reel,maker,part,lot,date_code,distributor,rereeled,quantity,marking\n"
          "R-1,Alder Works,AW1,A-77,2431,Pier Parts,no,100,AW\n");
    enter(*store, "order,designator,reel,possible_from,from,to,possible_to\nWO-1,U7,R-1,1,1,1,2\n");
    room::try_board(*store, "TB-01", Judgement::no_go, room::noon_us + 250'000);
  }
  using Lines = std::vector<std::string>;
  CHECK(shell(path,
              "SELECT serial, attempt, at, judgement, step, metric, variant, unit, value, n, state, verdict, low, "
              "high, spec_low, spec_high FROM results WHERE variant = 'x1'") ==
        Lines{"TB-01|1|2026-01-09T12:00:00.250Z|NO-GO|offset|offset|x1|V|0.0006|10|measured|missed|-0.00048|0.00048|"
              "-0.0005|0.0005"});
  CHECK(shell(path, "SELECT count(*) FROM results") == Lines{"3"});
  CHECK(shell(path,
              "SELECT serial, metric, verdict, designator, reel, maker, part, lot, date_code, how FROM "
              "results_by_reel WHERE variant = 'x10'") ==
        Lines{"TB-01|offset|met|U7|R-1|Alder Works|AW1|A-77|2024-W31|certain"});
  CHECK(shell(path, "SELECT serial, designator, reel, how FROM carries ORDER BY serial") ==
        Lines{"TB-01|U7|R-1|certain", "TB-02|U7|R-1|possible"});
  CHECK(shell(path, "SELECT serial, order_name, build_no, judgement, trials FROM boards ORDER BY serial") ==
        Lines{"TB-01|WO-1|1|NO-GO|1", "TB-02|WO-1|2||0"});
  CHECK(shell(path, "PRAGMA integrity_check") == Lines{"ok"});
  CHECK(shell(path, "PRAGMA foreign_key_check").empty());
}
