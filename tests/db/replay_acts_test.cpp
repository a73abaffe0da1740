// Copies of records written into a new store: what people did stands there as it stood.
#include <doctest/doctest.h>

#include "db/audit.hpp"
#include "db/digest.hpp"
#include "db/people.hpp"
#include "db/record_frames.hpp"
#include "db/replay.hpp"
#include "db/sqlite.hpp"
#include "tests/db/desk.hpp"

using namespace jigwright;
using room::must;

namespace {

CopySet copies_of_all(Database& db) {
  std::vector<ChainRow> records;
  {
    Query q = db.query(
        "SELECT s.uuid, s.name, j.epoch, j.seq, j.kind, j.uuid, j.at_us, j.body_sha256, j.hash FROM journal j "
        "JOIN station s ON s.id = j.station ORDER BY j.station, j.epoch, j.seq");
    while (q.next())
      records.push_back({q.text(0),
                         q.text(1),
                         {q.integer(2), q.integer(3), q.integer(4), q.text(5), q.integer(6), q.text(7)},
                         q.text(8)});
  }
  RecordFrames frames(db);
  std::unordered_set<std::string> held;
  std::string bytes;
  for (const ChainRow& record : records) bytes += must(frames.of(record, held));
  CopySet out;
  REQUIRE(read_frames(bytes, out) == bytes.size());
  return out;
}

void add_rows(std::string& out, Database& db, Sql sql, int columns) {
  Query q = db.query(sql);
  while (q.next()) {
    for (int i = 0; i < columns; ++i) out += (q.null(i) ? "NULL" : hex(q.text(i))) + '|';
    out += '\n';
  }
  REQUIRE(!db.failed());
}

std::string chains(Database& db) {
  std::string out;
  add_rows(out, db,
           "SELECT s.uuid, s.name, j.epoch, j.seq, j.kind, j.uuid, j.at_us, j.body_sha256, j.hash FROM journal j "
           "JOIN station s ON s.id = j.station ORDER BY s.uuid, j.epoch, j.seq",
           9);
  return out;
}

/// By content, without integer keys.
std::string rows(Database& db) {
  std::string out;
  add_rows(out, db,
           "SELECT a.uuid, s.name, a.kind, a.at_us, a.who, a.second, a.reason, a.about, a.ends, a.trial FROM act a "
           "JOIN station s ON s.id = a.station ORDER BY a.uuid",
           10);
  add_rows(out, db,
           "SELECT a.uuid, b.serial, x.attempts FROM act_board x JOIN act a ON a.id = x.act JOIN board b ON "
           "b.id = x.board ORDER BY 1, 2",
           3);
  add_rows(out, db, "SELECT a.uuid, v.key, v.value FROM act_value v JOIN act a ON a.id = v.act ORDER BY 1, 2", 3);
  add_rows(out, db, "SELECT name, role, badge, gone FROM credential ORDER BY name", 4);
  add_rows(out, db,
           "SELECT f.uuid, o.name, f.designator, r.name, f.poss_from, f.cert_from, f.cert_to, f.poss_to, f.repair, "
           "f.since_us, f.known_us, f.dropped_us, e.uuid, d.uuid FROM feed f JOIN product_order o ON o.id = f.ord "
           "JOIN reel r ON r.id = f.reel LEFT JOIN entered e ON e.id = f.entered LEFT JOIN entered d ON "
           "d.id = f.dropped_by ORDER BY f.uuid",
           14);
  add_rows(out, db, "SELECT serial, designator, reel, how FROM carries ORDER BY 1, 2, 3", 4);
  add_rows(out, db, "SELECT uuid, adopted, counts, attempt FROM trial ORDER BY uuid", 4);
  add_rows(out, db, "SELECT sha256, kind, body FROM document ORDER BY 1", 3);
  return out;
}

/// What the line and the desk are told of each board.
std::string answers(Database& db) {
  std::string out;
  for (const char* serial :
       {"TB-01", "TB-02", "TB-03", "TB-04", "TB-05", "TB-06", "TB-07", "TB-08", "TB-09", "TB-10", "TB-21", "NEW-3"}) {
    const BoardNow b = must(board_now(db, serial));
    out += std::string(serial) + ' ' + b.serial + ' ' + std::string(word(b.standing.state())) + ' ' + b.shipped_to +
           ' ' + std::to_string(b.standing.trials()) + sentence(b.standing.may_try(1), b) + '/' +
           sentence(b.standing.may_ship(), b);
    for (const HoldOn& h : b.holds) out += text(h.uuid) + h.who + h.reason + h.about + std::to_string(h.at_us);
    out += '\n';
  }
  for (const char* order : {"WO-1", "WO-2"})
    if (const auto a = adopted_for(db, order)) out += text(a->uuid) + std::to_string(a->number) + a->limits + '\n';
  return out;
}

/// Two stations and an office, an act of every kind, a trial between any two of them.
void work(Store& store) {
  std::int64_t at_us = room::noon_us;
  const auto at = [&] { return at_us += 1'000'000; };
  const auto act = [&](const std::string& kind, std::vector<std::string> boards) {
    return room::act(kind, std::move(boards), at());
  };
  const auto tries = [&](const std::string& serial, Judgement judgement) {
    return room::try_board(store, serial, judgement, at());
  };
  for (const char* name : {"Ann", "Old"})
    must(change_person(store.database(), store.uuids(),
                       {name, "operator", std::string("B-") + name, {}, false, "B. Boss", "office", at()}));
  must(change_person(store.database(), store.uuids(),
                     {"Eve", "engineer", "", "tall trees", false, "B. Boss", "office", at()}));
  must(change_person(store.database(), store.uuids(), {"Old", "operator", "", {}, true, "B. Boss", "office", at()}));
  room::write(store, act("log-in", {}));
  const OpenTrial miss = tries("TB-01", Judgement::no_go);
  tries("TB-01", Judgement::go);
  ActRecord review = act("review", {"TB-01"});
  review.trial = miss.uuid;
  room::write(store, review);
  ActRecord named = act("hold", {"TB-02", "TB-03"});
  const Uuid hold = room::write(store, named);
  tries("TB-04", Judgement::go);
  ActRecord release = act("release", {"TB-02"});
  release.ends = hold;
  room::write(store, release);
  tries("TB-02", Judgement::go);
  ActRecord by_reel = act("hold", {});
  by_reel.about = "reel R-2";
  by_reel.values = {{"by", "reel"}, {"name", "R-2"}};
  const Uuid rule = room::write(store, by_reel);
  ActRecord waive = act("waive", {"TB-09"});
  waive.ends = rule;
  room::write(store, waive);
  must(change_reel(store.database(), store.uuids(), {"U7", "R-9", "TB-08", {}, 0, "bench 1", "O. Perator", at()}));
  tries("TB-05", Judgement::no_go);
  tries("TB-05", Judgement::no_go);
  must(add_repair_feed(store.database(), store.uuids(), {"U7", "R-1", "TB-05", {}, 0, "office", "T. T.", at()}));
  ActRecord repair = act("repair", {"TB-05"});
  repair.values = {{"replaced", "U7"}, {"reel", "R-1"}};
  room::write(store, repair);
  room::write(store, act("allow", {"TB-06"}));
  room::write(store, act("scrap", {"TB-06"}));
  ActRecord ship = act("ship", {"TB-01", "TB-04"});
  ship.about = "Pier Labs";
  room::write(store, ship);
  room::write(store, act("return", {"TB-04"}));
  ActRecord alias = act("alias", {"TB-03"});
  alias.about = "NEW-3";
  room::write(store, alias);
  for (const bool stand : {true, false})
    must(adopt(store.database(), store.uuids(),
               {{"[plan]", "[jig]", stand ? "[limits]" : "[limits] 2"},
                stand ? "" : "WO-1",
                "office",
                "Eve",
                "Q. Lead",
                "tighter",
                stand,
                at()}));
  tries("TB-07", Judgement::go);
  for (const char* kind : {"stop", "go-on", "approve", "log-out"}) {
    ActRecord of_line = act(kind, {});
    of_line.station = "bench 1";
    of_line.about = "WO-1";
    room::write(store, of_line);
  }
}

}  // namespace

TEST_CASE("a replay of every kind of act gives the same hashes, rows and answers") {
  const auto store = room::memory(), other = room::memory();
  room::enter_two_orders(*store);
  work(*store);
  Database &db = store->database(), &copy = other->database();
  REQUIRE(must(audit(db)).whole());
  const Replayed replayed = must(replay(copy, other->uuids(), copies_of_all(db)));
  for (const std::string& gap : replayed.gaps) FAIL_CHECK(gap);
  CHECK(replayed.added == db.first("SELECT count(*) FROM journal"));
  CHECK(chains(copy) == chains(db));
  CHECK(rows(copy) == rows(db));
  CHECK(answers(copy) == answers(db));
  for (const Difference& d : must(audit(copy)).differences) FAIL_CHECK(sentence(d));
}

TEST_CASE("an act recorded while a trial runs elsewhere stands before that trial's board as it did") {
  // It stood by the newest trial's row once, which a replay makes at the trial's end.
  const auto store = room::memory(), other = room::memory();
  room::enter_two_orders(*store);
  TrialStart start = room::start("TB-01");
  const OpenTrial open = must(store->begin_trial(start));
  room::write(*store, room::act("repair", {"TB-01", "TB-02"}, room::noon_us + 1'000'000));
  TrialEnd end = room::end(Judgement::go);
  end.at_us = room::noon_us + 2'000'000;
  must(store->finish_trial(open, end));
  CHECK(room::shipment_bar(*store, "TB-01") == Bar::untried_since_repair);
  must(replay(other->database(), other->uuids(), copies_of_all(store->database())));
  CHECK(chains(other->database()) == chains(store->database()));
  CHECK(room::shipment_bar(*other, "TB-01") == Bar::untried_since_repair);
  CHECK(answers(other->database()) == answers(store->database()));
}

TEST_CASE("a password is in no copy: who has lost it may do nothing until it is set again") {
  const auto store = room::memory(), other = room::memory();
  must(change_person(store->database(), store->uuids(),
                     {"Eve", "engineer", "B-2", "tall trees", false, "B. Boss", "office", room::noon_us}));
  must(replay(other->database(), other->uuids(), copies_of_all(store->database())));
  const auto eve = person_of(other->database(), "Eve");
  REQUIRE(eve.has_value());
  CHECK(eve->badge == "B-2");
  CHECK(eve->password.empty());
  CHECK(!password_fits(*eve, "tall trees"));
  CHECK(must(audit(other->database())).whole());
  must(change_person(other->database(), other->uuids(),
                     {"Eve", "engineer", "B-2", "low clouds", false, "B. Boss", "office", room::noon_us}));
  CHECK(password_fits(*person_of(other->database(), "Eve"), "low clouds"));
}
