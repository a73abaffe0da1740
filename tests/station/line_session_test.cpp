// Shifts at the line, played by a host without jig or store.
#include "station/line_session.hpp"

#include <doctest/doctest.h>

#include <functional>
#include <map>

#include "station/cards.hpp"

using namespace jigwright;

namespace {

class FakeLine final : public LineHost {
 public:
  std::int64_t now_us() override { return 1'767'960'000'000'000; }
  BoardNow board(const std::string& serial) override {
    if (when_asked) when_asked();
    if (const auto found = boards.find(serial); found != boards.end()) return found->second;
    BoardNow unknown;
    unknown.serial = serial;
    return unknown;
  }
  bool reel_known(const std::string& label) override { return label.starts_with("R-"); }
  OrderCounts order(const std::string&) override { return counts; }
  AdoptedNow adopted(const std::string&) override { return in_force; }
  std::optional<PersonNow> person(const std::string& name) override {
    for (const PersonNow& p : people)
      if (p.badge == name || p.name == name) return p;
    return std::nullopt;
  }
  bool anybody_registered() override { return !people.empty(); }
  bool password_fits(const PersonNow& p, const std::string& password) override { return p.password == password; }
  std::optional<std::int64_t> unapproved(const std::string&) override { return unapproved_boards; }
  std::string stop_in_force() override { return stopped; }
  void start_trial(const std::string& serial, const std::string&) override { started.push_back(serial); }
  void abort_trial() override { ++aborted; }
  void record(const ActRecord& act) override {
    acts.push_back(act);
    if (act.kind == "stop") stopped = act.reason;
    if (act.kind == "go-on") stopped.clear();
  }
  void change_reel(const FeedChange& change) override { changes.push_back(change); }
  std::string hand_over(const std::string& text) override {
    sheet = text;
    return "sheet.txt";
  }
  void show(const LineView& v) override { view = v; }
  void quit() override { left = true; }

  std::function<void()> when_asked;
  std::map<std::string, BoardNow> boards;
  OrderCounts counts{240, 0, 0, 0, 0, 0};
  AdoptedNow in_force{true, "", 4};
  std::vector<PersonNow> people;
  std::optional<std::int64_t> unapproved_boards;
  std::string stopped, sheet;
  std::vector<std::string> started;
  std::vector<ActRecord> acts;
  std::vector<FeedChange> changes;
  LineView view;
  int aborted{0};
  bool left{false};
};

struct Shift {
  FakeLine line;
  Texts texts = std::move(Texts::of("en").value());
  ReadyPlan plan;
  std::optional<LineSession> session;

  Shift() {
    plan.plan.serial.pattern = "TB3-####";
    plan.plan.board.product = "amplifier";
    for (int i = 1; i <= 9; ++i) add("TB3-000" + std::to_string(i));
  }
  BoardNow& add(const std::string& serial) {
    BoardNow& b = line.boards[serial];
    b.serial = serial;
    b.known = true;
    b.order = "WO-1";
    b.product = "amplifier";
    b.build_no = 1;
    return b;
  }
  void begin(bool log_in = true) {
    session.emplace(line, texts, LineSetup{plan, "bench 1", "WO-1"});
    session->begin();
    if (!log_in) return;
    for (const std::string& scan : {test_code(), std::string("O. Perator"), std::string("XJ01")}) session->take(scan);
  }
  void scan(const std::string& text) { session->take(text); }
  /// The trial under way ends; the store knows it from then on.
  void ends(Judgement judgement, const std::string& reason = "the lid was opened") {
    TrialStart start;
    start.serial = line.started.back();
    TrialEnd end;
    end.outcome.judgement = judgement;
    if (judgement == Judgement::void_) end.outcome.void_reason = reason;
    if (judgement == Judgement::no_go) {
      FindingRow row;
      row.metric.name = {"offset", "offset", "x1"};
      row.metric.unit = Unit::volt;
      row.judged.finding = {0, 0.6e-3, 4e-6, 10, FindingState::measured};
      row.judged.verdict = Verdict::missed;
      end.findings.push_back(row);
      end.outcome.deciding = 0;
    }
    session->trial_ended(start, end, "Put the board on the reject shelf.", nullptr);
    line.boards[start.serial].standing.add(
        {BoardEvent::Kind::tried, start.serial + std::to_string(line.started.size()), judgement, false});
  }
  std::string shown() const {
    std::string out = line.view.word + "|";
    for (const std::string& l : line.view.lines) out += l + "|";
    return out + line.view.action + "|" + line.view.prompt;
  }
};

bool has(const std::string& text, const std::string& part) {
  return text.find(part) != std::string::npos;
}

}  // namespace

TEST_CASE("the shift begins with the keyboard's test, a badge and the wrist strap") {
  Shift b;
  b.begin(false);
  CHECK(b.line.view.prompt == "Scan the code TEST on the card sheet.");
  b.scan("TB3-0001");
  CHECK(b.line.started.empty());
  b.scan("XJTEST/zyZY&?*<");
  CHECK(has(b.shown(), "its keyboard layout is wrong"));
  b.scan(test_code());
  b.scan("O. Perator");
  b.scan("XJ02");
  CHECK(has(b.shown(), "Put the wrist strap on"));
  CHECK(b.line.acts.empty());
  b.scan("XJ01");
  REQUIRE(b.line.acts.size() == 1);
  CHECK(b.line.acts[0].kind == "log-in");
  CHECK(b.line.acts[0].who == "O. Perator");
  CHECK(b.line.view.prompt == "Scan a board.");
}

TEST_CASE("once people are registered, only they log in; an engineer's name needs a password, a badge does not") {
  Shift b;
  b.line.people = {{"Ann", "operator", "B-1", "", false},
                   {"Eve", "engineer", "B-2", "tall trees", false},
                   {"Old", "operator", "B-3", "", true}};
  b.begin(false);
  b.scan(test_code());
  b.scan("Somebody");
  CHECK(has(b.shown(), "This badge is not registered."));
  b.scan("B-3");
  CHECK(has(b.shown(), "This badge is not registered."));
  b.scan("Eve");
  CHECK(b.line.view.secret);
  b.scan("wrong");
  CHECK(!b.line.view.secret);
  CHECK(has(b.shown(), "The password is wrong."));
  b.scan("B-1");
  b.scan("XJ01");
  CHECK(b.session->who() == "Ann");
}

TEST_CASE("a GO board: one word, its serial, the next action, and ready at once") {
  Shift b;
  b.begin();
  b.scan("TB3-0001");
  CHECK(b.line.started == std::vector<std::string>{"TB3-0001"});
  CHECK(b.line.view.word.empty());  // nothing of the board before
  b.ends(Judgement::go);
  CHECK(b.shown() == "GO|TB3-0001|Take the board out. Scan the next one.|Scan a board.");
  CHECK(b.line.view.shape == Shape::disc);
  CHECK(has(b.line.view.state, "This shift: 1 tried, 1 GO, 0 NO-GO, 0 VOID. First-pass yield 100 %."));
}

TEST_CASE("after a NO-GO one reseat and retest, then the plan's own action and no third trial") {
  Shift b;
  b.begin();
  b.scan("TB3-0001");
  b.ends(Judgement::no_go);
  CHECK(has(b.shown(), "NO-GO|TB3-0001|offset: offset (x1) = 600 uV"));
  CHECK(b.line.view.action == "Open the lid, reseat the board, and scan it once more.");
  b.scan("XJ04");  // RESEAT
  REQUIRE(b.line.started.size() == 2);
  b.ends(Judgement::no_go);
  CHECK(b.line.view.action == "Put the board on the reject shelf.");
  b.scan("TB3-0001");
  CHECK(b.line.started.size() == 2);
  CHECK(has(b.shown(), "NOT TAKEN|TB3-0001 has had its trials. Put it on the repair shelf."));
}

TEST_CASE("a GO after a NO-GO goes to the review shelf") {
  Shift b;
  b.begin();
  b.scan("TB3-0001");
  b.ends(Judgement::no_go);
  b.scan("TB3-0001");
  b.ends(Judgement::go);
  CHECK(has(b.line.view.action, "review shelf"));
  b.scan("TB3-0001");
  CHECK(has(b.shown(), "waits for an engineer's review"));
}

TEST_CASE("scans that are no board of this line, each in a plain sentence, and no trial") {
  Shift b;
  b.add("TB3-0101").order = "WO-2";
  b.add("TB3-0102").product = "filter";
  b.add("TB3-0103").standing.add({BoardEvent::Kind::scrapped, "", Judgement::void_, false});
  BoardNow& held = b.add("TB3-0104");
  held.standing.add({BoardEvent::Kind::held, "h", Judgement::void_, false});
  held.holds.push_back({{}, "Eve", "reel R-7003 suspected", "", 0});
  b.begin();
  const std::pair<const char*, const char*> cases[] = {
      {"TB3-0101", "TB3-0101 belongs to order WO-2."},
      {"TB3-0102", "TB3-0102 is a filter. This line tries amplifier."},
      {"TB3-0103", "TB3-0103 is scrapped."},
      {"TB3-0104", "TB3-0104 is held: reel R-7003 suspected."},
      {"TB3-0999", "TB3-0999 is in no list of order WO-1."},
      {"TB3-00", "\"TB3-00\" is only part of a serial."},
      {"TB3-0001TB3-0002", "is two scans run together."},
      {"4006381333931", "is no serial of this product."},
      {"XJ03", "The card ABORT does nothing now."},
  };
  for (const auto& [scan, sentence] : cases) {
    CAPTURE(scan);
    b.scan(scan);
    CHECK(has(b.shown(), sentence));
    CHECK(b.line.view.word == "NOT TAKEN");
  }
  CHECK(b.line.started.empty());
}

TEST_CASE("scans in mid-trial are told and dropped; ABORT ends the trial") {
  Shift b;
  b.begin();
  b.scan("TB3-0001");
  b.scan("TB3-0002");
  CHECK(has(b.shown(), "\"TB3-0002\" was not taken"));
  CHECK(b.line.started.size() == 1);
  b.scan("XJ03");
  CHECK(b.line.aborted == 1);
  b.ends(Judgement::void_, "aborted at the line");
  CHECK(has(b.shown(), "VOID|TB3-0001|aborted at the line"));
  b.scan("TB3-0002");
  CHECK(b.line.started.size() == 2);
}

TEST_CASE("three in a row with the same cause stop the line until an engineer gives a reason") {
  Shift b;
  b.line.people = {{"Ann", "operator", "B-1", "", false}, {"Eve", "engineer", "B-2", "tall trees", false}};
  b.begin(false);
  for (const std::string& scan : {test_code(), std::string("B-1"), std::string("XJ01")}) b.scan(scan);
  for (const char* serial : {"TB3-0001", "TB3-0002", "TB3-0003"}) {
    CHECK(b.line.stopped.empty());
    b.scan(serial);
    b.ends(Judgement::no_go);
  }
  CHECK(b.line.view.word == "LINE STOPPED");
  CHECK(has(b.shown(), "3 boards in a row with the same cause: offset: offset"));
  b.scan("TB3-0004");
  b.scan("Ann");
  CHECK(b.line.started.size() == 3);
  CHECK(has(b.shown(), "Only an engineer can do that."));
  b.scan("Eve");
  b.scan("tall trees");
  b.scan("");
  CHECK(!b.line.stopped.empty());
  b.scan("probe OUT cleaned");
  CHECK(b.line.acts.back().kind == "go-on");
  CHECK(b.line.acts.back().who == "Eve");
  CHECK(b.line.acts.back().reason == "probe OUT cleaned");
  b.scan("TB3-0004");
  CHECK(b.line.started.size() == 4);
}

TEST_CASE("different causes, or a GO between, don't stop the line; a stop outlives the program") {
  Shift b;
  b.begin();
  for (const auto& [serial, judgement] : {std::pair("TB3-0001", Judgement::no_go),
                                          {"TB3-0002", Judgement::void_},
                                          {"TB3-0003", Judgement::no_go},
                                          {"TB3-0004", Judgement::no_go},
                                          {"TB3-0005", Judgement::go},
                                          {"TB3-0006", Judgement::no_go}}) {
    b.scan(serial);
    b.ends(judgement);
  }
  CHECK(b.line.stopped.empty());
  b.line.stopped = "3 boards in a row";
  b.begin();
  CHECK(b.line.view.word == "LINE STOPPED");
  b.scan("TB3-0007");
  CHECK(b.line.started.size() == 6);
}

TEST_CASE("the first boards of an order wait for an engineer's approval") {
  Shift b;
  b.plan.plan.line.first_articles = 2;
  b.begin();
  b.line.unapproved_boards = 1;
  b.scan("TB3-0001");
  b.ends(Judgement::go);
  b.line.unapproved_boards = 2;
  b.scan("TB3-0002");
  b.ends(Judgement::go);
  CHECK(has(b.shown(), "First boards of order WO-1"));
  b.scan("TB3-0003");     // no board is tried meanwhile
  b.scan("E. Engineer");  // any name, as long as nobody is registered: what is typed next is the reason
  b.line.unapproved_boards.reset();
  b.scan("records seen, wide margins");
  CHECK(b.line.acts.back().kind == "approve");
  CHECK(b.line.acts.back().about == "WO-1");
  CHECK(b.line.started.size() == 2);
}

TEST_CASE("a reel's label is a reel change, never a trial") {
  Shift b;
  b.begin();
  b.scan("R-7001");
  CHECK(has(b.line.view.prompt, "Scan or type the place it feeds"));
  b.scan("U7");
  b.scan("TB3-0004");
  REQUIRE(b.line.changes.size() == 1);
  CHECK(b.line.changes[0].designator == "U7");
  CHECK(b.line.changes[0].reel == "R-7001");
  CHECK(b.line.changes[0].serial == "TB3-0004");
  b.session->reel_changed(FeedChanged{"WO-1", 4, 240, "R-7000"});
  CHECK(has(b.shown(), "Reel R-7001 serves U7 from TB3-0004 on."));
  CHECK(b.line.started.empty());
  b.scan("R-7001");
  b.scan("XJ03");
  CHECK(has(b.shown(), "The reel change was dropped."));
}

TEST_CASE("files that are not the adopted ones: an operator can't go on, an engineer may") {
  Shift b;
  b.line.people = {{"Ann", "operator", "B-1", "", false}, {"Eve", "engineer", "B-2", "tall trees", false}};
  b.line.in_force = {true, "limits", 4};
  b.begin(false);
  for (const std::string& scan : {test_code(), std::string("B-1"), std::string("XJ01")}) b.scan(scan);
  CHECK(has(b.shown(), "limits differ from revision 4"));
  CHECK(!b.session->logged_in());
  for (const char* scan : {"B-2", "XJ01"}) b.scan(scan);
  CHECK(b.session->who() == "Eve");
}

TEST_CASE("a trial that could not be recorded ends the line") {
  Shift b;
  b.begin();
  b.scan("TB3-0001");
  const Error full{Error::Kind::store, "the disk is full", "results.db", "make room"};
  TrialStart start;
  start.serial = "TB3-0001";
  b.session->trial_ended(start, {}, "", &full);
  CHECK(has(b.shown(), "NOT RECORDED. Try no further board. the disk is full"));
  b.scan("TB3-0002");
  CHECK(b.line.started.size() == 1);
}

TEST_CASE("the shift ends with a hand-over sheet and a record") {
  Shift b;
  b.begin();
  b.scan("TB3-0001");
  b.ends(Judgement::go);
  b.scan("nonsense");
  b.line.counts = {240, 1, 1, 0, 2, 0};
  b.scan("XJ06");
  CHECK(has(b.line.view.prompt, "What must the next shift know?"));
  b.scan("probe OUT is worn");
  CHECK(b.line.left);
  CHECK(has(b.line.sheet, "Boards tried: 1. GO 1, NO-GO 0, VOID 0, refused scans 1."));
  CHECK(has(b.line.sheet, "2 held"));
  CHECK(has(b.line.sheet, "For the next shift: probe OUT is worn"));
  CHECK(b.line.acts.back().kind == "log-out");
  CHECK(b.line.acts.back().reason == "probe OUT is worn");
}

TEST_CASE("an instrument that is overdue lets no board in, one that soon will be is named") {
  Shift b;
  auto jig = std::make_shared<Jig>();
  Calibration meter;
  meter.instrument = "meter";
  meter.due = std::chrono::sys_days(std::chrono::year(2026) / 1 / 20);  // the fake's today is 9 January
  jig->calibrations = {meter};
  b.plan.jig = jig;
  b.begin();
  CHECK(has(b.shown(), "Soon: the calibration of meter ends on 2026-01-20, in 11 days."));
  CHECK(b.line.view.prompt == "Scan a board.");
  jig->calibrations[0].due = std::chrono::sys_days(std::chrono::year(2026) / 1 / 8);
  b.begin();
  CHECK(b.line.view.word == "LINE STOPPED");
  b.scan("TB3-0001");
  CHECK(b.line.started.empty());
}

TEST_CASE("a GO after a NO-GO that was reviewed long ago counts at once") {
  // The operator was once told to put it on the review shelf, where nothing was left to review.
  Shift b;
  b.begin();
  using Kind = BoardEvent::Kind;
  Standing& standing = b.add("TB3-0001").standing;
  for (const BoardEvent& e :
       {BoardEvent{Kind::tried, "1", Judgement::no_go, false}, BoardEvent{Kind::tried, "2", Judgement::go, false},
        BoardEvent{Kind::reviewed, "1", Judgement::void_, false},
        BoardEvent{Kind::repaired, {}, Judgement::void_, false}})
    standing.add(e);
  b.scan("TB3-0001");
  b.ends(Judgement::go);
  CHECK(b.line.view.action == "Take the board out. Scan the next one.");
}

TEST_CASE("a password is taken as typed, with its blanks") {
  // Blanks at its ends were once cut off, and such a password never fitted.
  Shift b;
  b.line.people = {{"Eve", "engineer", "B-2", " tall trees ", false}};
  b.begin(false);
  for (const std::string& scan : {test_code(), std::string("Eve"), std::string(" tall trees \r"), std::string("XJ01")})
    b.scan(scan);
  CHECK(b.session->who() == "Eve");
}

TEST_CASE(
    "files that stopped being the adopted ones since the log-in bar an operator's next board, not an engineer's") {
  // They were compared at the log-in only, and without an order in the command only with the revision for every
  // order.
  Shift b;
  b.line.people = {{"Ann", "operator", "B-1", "", false}, {"Eve", "engineer", "B-2", "tall trees", false}};
  b.begin(false);
  for (const std::string& scan : {test_code(), std::string("B-1"), std::string("XJ01")}) b.scan(scan);
  b.line.in_force = {true, "limits", 5};
  b.scan("TB3-0001");
  CHECK(b.line.started.empty());
  CHECK(has(b.shown(), "limits differ from revision 5"));
  for (const char* scan : {"B-2", "XJ01", "TB3-0001"}) b.scan(scan);
  CHECK(b.line.started.size() == 1);
}

TEST_CASE("a board scanned while the line is stopped is no engineer, and no reason") {
  // Before anybody was registered its serial was taken for a name, and the next one for the reason.
  Shift b;
  b.begin();
  for (const char* serial : {"TB3-0001", "TB3-0002", "TB3-0003"}) {
    b.scan(serial);
    b.ends(Judgement::no_go);
  }
  REQUIRE(!b.line.stopped.empty());
  for (const char* serial : {"TB3-0004", "TB3-0005"}) b.scan(serial);
  CHECK(!b.line.stopped.empty());
  b.scan("E. Engineer");
  b.scan("TB3-0004");
  CHECK(!b.line.stopped.empty());
  b.scan("a bent probe");
  CHECK(b.line.stopped.empty());
  CHECK(b.line.acts.back().who == "E. Engineer");
}

TEST_CASE("a board scanned before anybody has logged in logs nobody in") {
  Shift b;
  b.begin(false);
  for (const std::string& scan : {test_code(), std::string("TB3-0001"), std::string("XJ01")}) b.scan(scan);
  CHECK(!b.session->logged_in());
}

TEST_CASE("a store that fails to answer a scan ends the line: no trial, and no way on") {
  Shift b;
  b.begin();
  b.line.counts = {};  // what a host gives in place of an answer
  b.line.when_asked = [&b] { b.session->record_failed({Error::Kind::store, "the file is damaged", "results.db", ""}); };
  b.scan("TB3-0777");
  CHECK(b.line.started.empty());
  CHECK(has(b.shown(), "NOT RECORDED. Try no further board. the file is damaged"));
  b.line.when_asked = nullptr;
  b.scan("TB3-0001");
  CHECK(b.line.started.empty());
  CHECK(b.line.view.word == "LINE STOPPED");
}
