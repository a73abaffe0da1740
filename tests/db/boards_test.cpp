#include "db/boards.hpp"

#include "db/audit.hpp"
#include "db/line_questions.hpp"
#include "db/sqlite.hpp"
#include "tests/db/desk.hpp"

using namespace jigwright;
using room::must;
using Serials = std::vector<std::string>;

namespace {

constexpr auto go = Judgement::go;
constexpr auto no_go = Judgement::no_go;
constexpr auto void_ = Judgement::void_;

struct Shop {
  std::unique_ptr<Store> store = room::memory();
  Shop() { room::enter_two_orders(*store); }

  Bar ship(const std::string& serial) { return room::shipment_bar(*store, serial); }
  Bar try_again(const std::string& serial, int retests = 1) { return room::trial_bar(*store, serial, retests); }
  BoardNow now(const std::string& serial) { return room::now(*store, serial); }
  Uuid does(const std::string& kind, Serials boards, std::int64_t at_us = room::noon_us) {
    return room::write(*store, room::act(kind, std::move(boards), at_us));
  }
  OpenTrial tries(const std::string& serial, Judgement judgement, std::int64_t at_us = room::noon_us) {
    return room::try_board(*store, serial, judgement, at_us);
  }
  void review(const std::string& serial, const OpenTrial& of) {
    ActRecord act = room::act("review", {serial});
    act.trial = of.uuid;
    room::write(*store, act);
  }
  Result<Serials> choose(const BoardChoice& choice) { return chosen_boards(store->database(), choice); }
  Serials where(const std::string& condition) {
    BoardChoice choice;
    choice.condition = condition;
    return must(choose(choice));
  }
  std::string fault(const BoardChoice& choice) {
    const auto chosen = choose(choice);
    REQUIRE(!chosen.ok());
    CHECK(chosen.error().kind == Error::Kind::usage);
    return chosen.error().what + "; " + chosen.error().to_do;
  }
  std::string condition_fault(const std::string& condition) {
    BoardChoice choice;
    choice.condition = condition;
    return fault(choice);
  }
  void check_whole() {
    const auto report = must(audit(store->database()));
    for (const Difference& d : report.differences) FAIL_CHECK(sentence(d));
  }
};

bool has(const std::string& text, const std::string& part) {
  CAPTURE(text);
  return text.find(part) != std::string::npos;
}

}  // namespace

TEST_CASE("a board is known by its list or by a trial; a serial of neither is no error") {
  Shop s;
  const BoardNow listed = s.now("TB-03");
  CHECK(listed.known);
  CHECK(listed.order == "WO-1");
  CHECK(listed.product == "amp");
  CHECK(listed.build_no == 3);
  CHECK(listed.standing.state() == BoardState::fresh);
  CHECK(s.ship("TB-03") == Bar::not_tried);
  CHECK(s.try_again("TB-03") == Bar::none);
  const BoardNow unknown = s.now("TB-99");
  CHECK(!unknown.known);
  CHECK(unknown.serial == "TB-99");
  s.tries("TB-99", go);
  CHECK(s.now("TB-99").known);
  CHECK(s.now("TB-99").order == "WO-1");  // as its trial says
  CHECK(!s.now("TB-99").build_no);
}

TEST_CASE("trials of every judgement: only GO is fit for shipment") {
  Shop s;
  s.tries("TB-01", go);
  s.tries("TB-02", no_go);
  s.tries("TB-03", void_);
  must(s.store->begin_trial(room::start("TB-04")));  // under way
  CHECK(s.ship("TB-01") == Bar::none);
  CHECK(s.ship("TB-02") == Bar::not_go);
  CHECK(s.ship("TB-03") == Bar::not_go);
  CHECK(s.ship("TB-04") == Bar::not_go);
  CHECK(s.try_again("TB-01") == Bar::already_go);
  CHECK(s.try_again("TB-02") == Bar::none);
  CHECK(s.try_again("TB-02", 0) == Bar::needs_repair);
  s.tries("TB-02", void_);
  CHECK(s.try_again("TB-02") == Bar::needs_repair);
  s.does("allow", {"TB-02"});
  CHECK(s.try_again("TB-02") == Bar::none);
}

TEST_CASE("a GO after a NO-GO waits for the review of that NO-GO, and of no other trial") {
  Shop s;
  const OpenTrial miss = s.tries("TB-01", no_go);
  const OpenTrial second = s.tries("TB-01", go);
  CHECK(s.ship("TB-01") == Bar::needs_review);
  CHECK(s.try_again("TB-01") == Bar::needs_review);
  CHECK(s.now("TB-01").standing.to_review() == std::string(bytes(miss.uuid)));
  s.review("TB-01", second);
  CHECK(s.ship("TB-01") == Bar::needs_review);
  s.review("TB-01", miss);
  CHECK(s.ship("TB-01") == Bar::none);
  s.check_whole();  // the mark of the trial that speaks went along
}

TEST_CASE("a repair asks for a trial before a shipment, and allows it") {
  Shop s;
  s.tries("TB-01", no_go);
  s.tries("TB-01", no_go);
  CHECK(s.try_again("TB-01") == Bar::needs_repair);
  s.does("repair", {"TB-01"});
  CHECK(s.now("TB-01").standing.state() == BoardState::repaired);
  CHECK(s.try_again("TB-01") == Bar::none);
  s.tries("TB-02", go);
  s.does("repair", {"TB-02"});
  CHECK(s.ship("TB-02") == Bar::untried_since_repair);
  s.tries("TB-02", go);
  CHECK(s.ship("TB-02") == Bar::none);
}

TEST_CASE("a hold bars trial and shipment of the boards it names, and of no other") {
  Shop s;
  s.tries("TB-01", go);
  s.tries("TB-02", go);
  room::hold(*s.store, {"TB-01", "TB-03"}, "a crack");
  CHECK(s.ship("TB-01") == Bar::held);
  CHECK(s.try_again("TB-03") == Bar::held);
  CHECK(s.ship("TB-02") == Bar::none);
  const BoardNow board = s.now("TB-01");
  REQUIRE(board.holds.size() == 1);
  CHECK(board.holds[0].reason == "a crack");
  CHECK(board.holds[0].who == "E. Engineer");
  CHECK(board.holds[0].about.empty());
  CHECK(sentence(Bar::held, board) == "Board TB-01 is held by E. Engineer: a crack.");
}

TEST_CASE("a release of one of several boards leaves the others held; a waiver lifts as well") {
  Shop s;
  for (const char* serial : {"TB-01", "TB-02", "TB-03"}) s.tries(serial, go);
  const Uuid hold = room::hold(*s.store, {"TB-01", "TB-02", "TB-03"});
  room::lift(*s.store, "release", hold, {"TB-01"});
  CHECK(s.ship("TB-01") == Bar::none);
  CHECK(s.now("TB-01").standing.state() == BoardState::released);
  CHECK(s.ship("TB-02") == Bar::held);
  room::lift(*s.store, "waive", hold, {"TB-02"});
  CHECK(s.ship("TB-02") == Bar::none);
  CHECK(s.ship("TB-03") == Bar::held);
}

TEST_CASE("a board released and tried is tried, though another of the same hold is released later") {
  // A release of another board once stood for this one's, behind its trial: it showed as released.
  Shop s;
  const Uuid hold = room::hold(*s.store, {"TB-01", "TB-02"});
  room::lift(*s.store, "release", hold, {"TB-01"});
  s.tries("TB-01", go);
  room::lift(*s.store, "release", hold, {"TB-02"});
  CHECK(s.now("TB-01").standing.state() == BoardState::tried);
  CHECK(s.now("TB-02").standing.state() == BoardState::released);
}

TEST_CASE("of two holds at once each must be lifted") {
  Shop s;
  s.tries("TB-01", go);
  const Uuid first = room::hold(*s.store, {"TB-01"}, "a crack");
  const Uuid second = room::hold(*s.store, {"TB-01"}, "a smell");
  CHECK(sentence(Bar::held, s.now("TB-01")) == "Board TB-01 is held by E. Engineer: a crack (and 1 more holds).");
  room::lift(*s.store, "release", second, {"TB-01"});
  CHECK(s.ship("TB-01") == Bar::held);
  CHECK(s.now("TB-01").holds.at(0).reason == "a crack");
  room::lift(*s.store, "release", first, {"TB-01"});
  CHECK(s.ship("TB-01") == Bar::none);
}

TEST_CASE("a hold by order takes in its boards, those listed later too, and a board tried for it") {
  Shop s;
  room::hold_by(*s.store, "order", "WO-2");
  CHECK(s.try_again("TB-21") == Bar::held);
  CHECK(s.try_again("TB-01") == Bar::none);
  room::enter(*s.store, {{"more.csv", room::places("WO-2", 3, 3, 23)}});
  CHECK(s.try_again("TB-23") == Bar::held);
  TrialStart start = room::start("TB-77");
  start.order = "WO-2";
  must(s.store->finish_trial(must(s.store->begin_trial(start)), room::end(go)));
  CHECK(s.ship("TB-77") == Bar::held);
  CHECK(s.now("TB-77").holds.at(0).about == "order WO-2");
}

TEST_CASE("a hold by reel takes in certain and possible carriers, not the others, and leaves a repaired board out") {
  Shop s;
  room::hold_by(*s.store, "reel", "R-2");
  CHECK(s.try_again("TB-04") == Bar::none);
  CHECK(s.try_again("TB-05") == Bar::held);  // possible
  CHECK(s.try_again("TB-06") == Bar::held);
  must(add_repair_feed(s.store->database(), s.store->uuids(),
                       {"U7", "R-9", "TB-06", {}, 0, "office", "T. Technician", room::noon_us}));
  CHECK(s.try_again("TB-06") == Bar::none);
  CHECK(s.try_again("TB-07") == Bar::held);
  room::enter(*s.store, {{"more.csv", room::places("WO-1", 11, 11, 11)},
                         {"feeds.csv", "order,designator,reel,from,to\nWO-1,R5,R-2,11,11\n"}});
  CHECK(s.try_again("TB-11") == Bar::held);  // known after the hold
}

TEST_CASE("a hold by a maker's lot takes in the boards of all its reels") {
  Shop s;
  const Uuid hold = room::hold_by(*s.store, "lot", "L2");
  CHECK(s.try_again("TB-04") == Bar::none);
  CHECK(s.try_again("TB-05") == Bar::held);
  CHECK(s.try_again("TB-10") == Bar::held);
  CHECK(s.try_again("TB-21") == Bar::held);
  room::lift(*s.store, "release", hold, {"TB-21"});
  CHECK(s.try_again("TB-21") == Bar::none);
  CHECK(s.try_again("TB-22") == Bar::held);
}

TEST_CASE("a release without boards lifts a hold for all, also where the hold came after trials") {
  Shop s;
  s.tries("TB-06", go);
  const Uuid hold = room::hold_by(*s.store, "reel", "R-2", {"TB-06"});
  CHECK(s.ship("TB-06") == Bar::held);
  room::lift(*s.store, "release", hold, {});
  CHECK(s.ship("TB-06") == Bar::none);
  CHECK(s.try_again("TB-07") == Bar::none);
}

TEST_CASE("a hold by rule ends with a release by the same rule; boards known later are free") {
  // It could not be ended once: a release named the boards known then, and each later one was held again.
  Shop s;
  const Uuid hold = room::hold_by(*s.store, "order", "WO-2", {"TB-21", "TB-22"});
  room::lift(*s.store, "release", hold, {"TB-21", "TB-22"});
  room::enter(*s.store, {{"more.csv", room::places("WO-2", 3, 3, 23)}});
  CHECK(s.try_again("TB-23") == Bar::held);
  CHECK(rules_in_force(s.store->database()).size() == 1);
  room::lift_rule(*s.store, hold, "order", "WO-2", {"TB-23"});
  CHECK(rules_in_force(s.store->database()).empty());
  room::enter(*s.store, {{"last.csv", room::places("WO-2", 4, 4, 24)}});
  CHECK(s.try_again("TB-23") == Bar::none);
  CHECK(s.try_again("TB-24") == Bar::none);
}

TEST_CASE("an order's counts: tried, GO, waiting, VOID, and held by name or by rule, once each") {
  Shop s;
  const auto counts = [&](const std::string& order) { return must(order_counts(s.store->database(), order)); };
  CHECK(counts("WO-1").all == 10);
  CHECK(counts("WO-1").held == 0);
  s.tries("TB-01", go);
  s.tries("TB-02", no_go);
  s.tries("TB-02", go);
  s.tries("TB-03", void_);
  CHECK(counts("WO-1").tried == 3);
  CHECK(counts("WO-1").go == 1);
  CHECK(counts("WO-1").waiting == 1);
  CHECK(counts("WO-1").voids == 1);
  const Uuid named = room::hold(*s.store, {"TB-05", "TB-06", "TB-21"});
  CHECK(counts("WO-1").held == 2);
  CHECK(counts("WO-2").held == 1);
  const Uuid reel = room::hold_by(*s.store, "reel", "R-2");  // places 5 to 10
  CHECK(counts("WO-1").held == 6);
  room::lift(*s.store, "release", named, {"TB-05"});
  CHECK(counts("WO-1").held == 6);
  room::lift_rule(*s.store, reel, "reel", "R-2", {});
  CHECK(counts("WO-1").held == 1);
  room::hold_by(*s.store, "lot", "L1");  // places 1 to 5
  CHECK(counts("WO-1").held == 6);
  CHECK(counts("WO-2").held == 1);
  room::hold_by(*s.store, "order", "WO-2");
  CHECK(counts("WO-2").held == 2);
  CHECK(counts("WO-1").held == 6);
  CHECK(counts("WO-3").all == 0);
}

TEST_CASE("boards are chosen by serial, order, reel and lot; all that is given must hold; by order and place") {
  Shop s;
  BoardChoice choice;
  choice.serials = {"TB-21", "TB-02", "TB-01", "TB-02"};
  CHECK(must(s.choose(choice)) == Serials{"TB-01", "TB-02", "TB-21"});
  choice.order = "WO-2";
  CHECK(must(s.choose(choice)) == Serials{"TB-21"});
  choice = {};
  choice.order = "WO-2";
  CHECK(must(s.choose(choice)) == Serials{"TB-21", "TB-22"});
  choice = {};
  choice.reel = "R-1";
  CHECK(must(s.choose(choice)) == Serials{"TB-01", "TB-02", "TB-03", "TB-04", "TB-05"});
  choice = {};
  choice.lot = "L2";
  choice.order = "WO-1";
  CHECK(must(s.choose(choice)) == Serials{"TB-05", "TB-06", "TB-07", "TB-08", "TB-09", "TB-10"});
  choice = {};
  choice.reel = "R-9";
  CHECK(must(s.choose(choice)).empty());
}

TEST_CASE("a choice that names nothing, or something unknown, is told in a sentence") {
  Shop s;
  CHECK(s.fault({}) == "no board is named; give serials, --order, --reel, --lot or --where");
  BoardChoice choice;
  choice.serials = {"TB-01", "TB-1"};
  CHECK(has(s.fault(choice), "board TB-1 is not known"));
  choice = {};
  choice.order = "WO-3";
  CHECK(has(s.fault(choice), "no board of order WO-3 is known"));
  choice = {};
  choice.reel = "R-77";
  CHECK(has(s.fault(choice), "reel R-77 is not known"));
  choice = {};
  choice.lot = "L7";
  CHECK(has(s.fault(choice), "lot L7 is not known"));
}

namespace {

/// One board, its offset in x1; that in x10 is 0.2 mV in each.
void offset(Shop& s, const std::string& serial, double x1_V) {
  must(s.store->finish_trial(must(s.store->begin_trial(room::start(serial))), room::end(go, x1_V)));
}

}  // namespace

TEST_CASE("a condition is about the trial that speaks, strict, with its sign or in magnitude") {
  Shop s;
  offset(s, "TB-01", 0.3e-3);
  offset(s, "TB-02", -0.3e-3);
  offset(s, "TB-03", 0.1e-3);
  offset(s, "TB-04", 0.4e-3);
  offset(s, "TB-04", 0.05e-3);  // its latest
  CHECK(s.where("offset.offset [x1] > 0.2 mV") == Serials{"TB-01"});
  CHECK(s.where("offset.offset [x1] < 0 V") == Serials{"TB-02"});
  CHECK(s.where("|offset.offset [x1]| > 0.2 mV") == Serials{"TB-01", "TB-02"});
  CHECK(s.where("| offset.offset [ x1 ] |>200 uV") == Serials{"TB-01", "TB-02"});
  CHECK(s.where("offset.offset [x1] > 0.5 V").empty());
  CHECK(s.where("offset.offset > 0.15 mV") == Serials{"TB-01", "TB-02", "TB-03", "TB-04"});  // in any variant
  BoardChoice both;
  both.condition = "offset.offset > 0.15 mV";
  both.serials = {"TB-03", "TB-05"};
  CHECK(must(s.choose(both)) == Serials{"TB-03"});
}

TEST_CASE("a variant in a condition is that variant, not each that holds its letters") {
  // [x1] once took in x10 and x100, whose gains are ten and a hundred times as high.
  Shop s;
  offset(s, "TB-01", 0.1e-3);
  CHECK(s.where("offset.offset [x1] > 0.15 mV").empty());
  CHECK(s.where("offset.offset [x10] > 0.15 mV") == Serials{"TB-01"});
}

TEST_CASE("a variant of several words is named by its first ones") {
  Shop s;
  TrialEnd end = room::end(go);
  end.findings = {room::offset_row("1 nF at 0 V", 0.3e-3, Verdict::met),
                  room::offset_row("11 nF at 0 V", 0.1e-3, Verdict::met)};
  must(s.store->finish_trial(must(s.store->begin_trial(room::start("TB-01"))), end));
  CHECK(s.where("offset.offset [1 nF] > 0.2 mV") == Serials{"TB-01"});
  CHECK(s.where("offset.offset [1 nF at 0 V] > 0.2 mV") == Serials{"TB-01"});
  CHECK(s.where("offset.offset [11 nF] > 0.2 mV").empty());
  CHECK(s.where("offset.offset [1 nF] < 0.2 mV").empty());
}

TEST_CASE("a condition that can't be read, or that no trial can meet, is told") {
  Shop s;
  offset(s, "TB-01", 0.1e-3);
  CHECK(has(s.condition_fault("offset.offset 3 mV"), "has no < and no >"));
  CHECK(has(s.condition_fault("offset > 3 mV"), "names no metric as STEP.METRIC"));
  CHECK(has(s.condition_fault("offset.offset [x1 > 3 mV"), "has a [ without its ]"));
  CHECK(has(s.condition_fault("offset.offset [x1] > much"), "the condition \"offset.offset [x1] > much\""));
  CHECK(has(s.condition_fault("offset.offset [x1] >"), "the condition"));
  CHECK(has(s.condition_fault(""), "no board is named"));
  CHECK(has(s.condition_fault("offset.ofset > 3 mV"), "no trial has the metric \"offset.ofset\"; known are"));
  CHECK(s.condition_fault("offset.offset [x1] > 3 mA") ==
        "offset.offset is found in V, and the condition is in A; write the value in the metric's own unit");
  const std::string variant = s.condition_fault("offset.offset [x2] > 3 mV");
  CHECK(has(variant, "offset.offset has no variant \"x2\"; known are x1, x10"));
}

TEST_CASE("a scan of a new label means the board, whichever of its labels it bears") {
  Shop s;
  const auto relabel = [&](const std::string& board, const std::string& label) {
    ActRecord act = room::act("alias", {s.now(board).serial});
    act.about = label;
    room::write(*s.store, act);
  };
  s.tries("TB-01", go);
  relabel("TB-01", "NEW-1");
  relabel("NEW-1", "NEW-2");  // the label of a label
  for (const char* label : {"NEW-1", "NEW-2"}) {
    const BoardNow board = s.now(label);
    CHECK(board.serial == "TB-01");
    CHECK(board.scanned == label);
    CHECK(board.known);
    CHECK(board.standing.may_ship() == Bar::none);
  }
  CHECK(s.now("TB-01").scanned.empty());
  room::hold(*s.store, {"TB-01"});
  CHECK(s.ship("NEW-2") == Bar::held);
  BoardChoice choice;
  choice.serials = {"NEW-2", "NEW-1", "TB-01"};
  CHECK(must(s.choose(choice)) == Serials{"TB-01"});
}

TEST_CASE("a shipment, a return, and scrapping for good") {
  Shop s;
  s.tries("TB-01", go);
  ActRecord ship = room::act("ship", {"TB-01"});
  ship.about = "Pier Labs";
  room::write(*s.store, ship);
  const BoardNow gone = s.now("TB-01");
  CHECK(gone.standing.state() == BoardState::shipped);
  CHECK(gone.shipped_to == "Pier Labs");
  CHECK(s.ship("TB-01") == Bar::shipped);
  CHECK(s.try_again("TB-01") == Bar::shipped);
  CHECK(sentence(Bar::shipped, gone) == "Board TB-01 is on record as shipped to Pier Labs.");
  s.does("return", {"TB-01"});
  CHECK(s.now("TB-01").standing.state() == BoardState::tried);
  CHECK(s.ship("TB-01") == Bar::none);
  s.does("scrap", {"TB-01"});
  CHECK(s.ship("TB-01") == Bar::scrapped);
  CHECK(s.try_again("TB-01") == Bar::scrapped);
  CHECK(sentence(Bar::scrapped, s.now("TB-01")) == "Board TB-01 is scrapped.");
}

TEST_CASE("events stand in the order of their records, whatever the clock says") {
  Shop s;
  std::int64_t at = room::noon_us;
  const auto earlier = [&] { return at -= 3'600'000'000; };
  s.tries("TB-01", go, earlier());
  s.does("repair", {"TB-01"}, earlier());
  CHECK(s.ship("TB-01") == Bar::untried_since_repair);
  s.tries("TB-01", go, earlier());
  CHECK(s.ship("TB-01") == Bar::none);
  s.does("ship", {"TB-01"}, earlier());
  s.does("return", {"TB-01"}, earlier());
  CHECK(s.ship("TB-01") == Bar::none);
  s.does("repair", {"TB-01"}, earlier());
  s.tries("TB-01", no_go, earlier());
  s.tries("TB-01", go, earlier());
  CHECK(s.ship("TB-01") == Bar::needs_review);
  s.check_whole();
}

TEST_CASE("what happens to other boards in between changes nothing about the order") {
  Shop s;
  s.tries("TB-01", go);
  for (int i = 2; i < 8; ++i) s.tries("TB-0" + std::to_string(i), no_go);
  s.does("repair", {"TB-01", "TB-02"});
  for (int i = 3; i < 8; ++i) s.tries("TB-0" + std::to_string(i), go);
  CHECK(s.ship("TB-01") == Bar::untried_since_repair);
  CHECK(s.try_again("TB-02") == Bar::none);
  s.tries("TB-01", go);
  CHECK(s.ship("TB-01") == Bar::none);
}

TEST_CASE("the acts on a board, of a kind, and the newest about something") {
  Shop s;
  room::hold(*s.store, {"TB-01", "TB-02"}, "first");
  room::hold_by(*s.store, "reel", "R-2");
  s.does("scrap", {"TB-02"});
  Database& db = s.store->database();
  CHECK(acts_of(db, "hold").size() == 2);
  CHECK(acts_on(db, "TB-01").size() == 1);
  const auto second = acts_on(db, "TB-02");
  REQUIRE(second.size() == 2);
  CHECK(second[0].boards == Serials{"TB-01", "TB-02"});
  CHECK(second[1].kind == "scrap");
  CHECK(last_act(db, "hold")->about == "reel R-2");
  CHECK(last_act(db, "hold")->values == std::map<std::string, std::string>{{"by", "reel"}, {"name", "R-2"}});
  CHECK(!last_act(db, "hold", "reel R-1"));
}
