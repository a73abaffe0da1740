#include "db/store.hpp"

#include <sqlite3.h>

#include <fstream>
#include <functional>

#include "db/sqlite.hpp"
#include "tests/db/room.hpp"

using namespace jigwright;
using room::must;

namespace {

std::int64_t number(Store& store, Sql sql) {
  const auto found = store.database().first(sql);
  REQUIRE(found.has_value());
  return *found;
}

std::string word(Store& store, Sql sql) {
  Query q = store.database().query(sql);
  REQUIRE(q.next());
  return q.text(0);
}

void plain_sql(const std::string& path, const char* sql) {
  sqlite3* handle = nullptr;
  REQUIRE(sqlite3_open(path.c_str(), &handle) == SQLITE_OK);
  CHECK(sqlite3_exec(handle, sql, nullptr, nullptr, nullptr) == SQLITE_OK);
  sqlite3_close(handle);
}

}  // namespace

TEST_CASE("a new store is a WAL file with our mark, layout 3, and syncs fully") {
  room::TempFolder folder;
  const auto store = room::open(folder.file("s.db"));
  CHECK(number(*store, "PRAGMA application_id") == 0x4a494757);
  CHECK(number(*store, "PRAGMA user_version") == 3);
  CHECK(word(*store, "PRAGMA journal_mode") == "wal");
  CHECK(number(*store, "PRAGMA synchronous") == 2);
  CHECK(number(*store, "PRAGMA foreign_keys") == 1);
  CHECK(number(*store, "SELECT length(value) FROM meta WHERE key = 'store'") == 16);
}

TEST_CASE("a store opens again with what it held") {
  room::TempFolder folder;
  room::try_board(*room::open(folder.file("s.db")), "TB3-0001", Judgement::go);
  const auto again = room::open(folder.file("s.db"));
  CHECK(number(*again, "SELECT count(*) FROM finding") == 3);
}

TEST_CASE("a missing store is not made where none is wanted") {
  room::TempFolder folder;
  StoreOptions options;
  options.create = false;
  const auto store = Store::open(folder.file("none.db"), options);
  REQUIRE(!store);
  CHECK(store.error().kind == Error::Kind::store);
  CHECK(store.error().what == "there is no store here");
  CHECK(!std::filesystem::exists(folder.file("none.db")));
}

TEST_CASE("a text file is not a store") {
  room::TempFolder folder;
  std::ofstream(folder.file("notes.txt")) << std::string(5000, 'x');
  const auto store = Store::open(folder.file("notes.txt"));
  REQUIRE(!store);
  CHECK(store.error().what == "this file is not a store");
}

TEST_CASE("another program's SQLite file is refused and left alone") {
  room::TempFolder folder;
  plain_sql(folder.file("other.db"), "CREATE TABLE t(a)");
  const auto store = Store::open(folder.file("other.db"));
  REQUIRE(!store);
  CHECK(store.error().what == "this SQLite file is not a store of this program");
}

TEST_CASE("a newer program's store is refused in plain words") {
  room::TempFolder folder;
  room::open(folder.file("s.db"));
  plain_sql(folder.file("s.db"), "PRAGMA user_version = 4");
  const auto store = Store::open(folder.file("s.db"));
  REQUIRE(!store);
  CHECK(store.error().what == "a newer program made this store (layout 4, this program knows layout 3)");
  CHECK(store.error().to_do == "use the newer program; nothing was changed");
}

TEST_CASE("a store opened for reading can't be written") {
  room::TempFolder folder;
  const auto writer = room::open(folder.file("s.db"));
  StoreOptions options;
  options.access = StoreOptions::Access::read;
  const auto reader = room::open(folder.file("s.db"), options);
  CHECK(!reader->begin_trial(room::start("TB3-0001")));
}

TEST_CASE("a trial that was begun and never ended shows as VOID with the reason") {
  const auto store = room::memory();
  must(store->begin_trial(room::start("TB3-0001")));
  CHECK(number(*store, "SELECT state FROM trial") == 0);
  CHECK(number(*store, "SELECT counts FROM trial") == 1);
  CHECK(word(*store, "SELECT void_reason FROM trial") == "the program ended in mid-trial");
  CHECK(word(*store, "SELECT judgement FROM boards") == "VOID");
}

TEST_CASE("an open trial is in the file before begin_trial returns") {
  room::TempFolder folder;
  const auto store = room::open(folder.file("s.db"));
  must(store->begin_trial(room::start("TB3-0001")));
  const auto other = room::open(folder.file("s.db"));
  CHECK(number(*other, "SELECT count(*) FROM trial") == 1);
}

TEST_CASE("an ended trial holds its judgement, findings, readings and what judged them") {
  const auto store = room::memory();
  const OpenTrial open = must(store->begin_trial(room::start("TB3-0001")));
  must(store->finish_trial(open, room::end(Judgement::no_go, 0.6e-3)));
  Query q = store->database().query(
      "SELECT t.judgement, t.void_reason, t.nogo, t.took_ms, t.ambient_degC, t.unsafe, m.variant, t.worst_margin, "
      "p.name, s.name, r.limit_set, r.number FROM trial t JOIN metric m ON m.id = t.deciding_metric "
      "JOIN person p ON p.id = t.operator JOIN station s ON s.id = t.station JOIN revision r ON r.id = t.revision");
  REQUIRE(q.next());
  CHECK(q.integer(0) == 1);
  CHECK(q.null(1));
  CHECK(q.integer(2) == 1);
  CHECK(q.integer(3) == 2200);
  CHECK(q.real(4) == 23.5);
  CHECK(q.null(5));
  CHECK(q.text(6) == "x1");
  CHECK(q.real(7) == doctest::Approx(-0.25));  // (0.48 - 0.6) / 0.48
  CHECK(q.text(8) == "A. Tester");
  CHECK(q.text(9) == "bench 1");
  CHECK(q.text(10) == "limits-1");
  CHECK(q.integer(11) == 3);
  CHECK(number(*store, "SELECT count(*) FROM finding WHERE u IS NULL") == 1);
  CHECK(word(*store, "SELECT body FROM reading_blob") == std::string("\x01\x00\x7f", 3));
  CHECK(number(*store, "SELECT count(*) FROM applied_limit WHERE spec_high = 0.5e-3 AND high = 0.48e-3") == 2);
  CHECK(number(*store, "SELECT version FROM reduction_step WHERE kind = 'known-value'") == 2);
  CHECK(word(*store, "SELECT body FROM document WHERE kind = 'plan'") == "[plan]");
}

TEST_CASE("what many trials share is kept once") {
  const auto store = room::memory();
  for (int i = 0; i < 5; ++i) room::try_board(*store, "TB3-000" + std::to_string(i), Judgement::go);
  for (Sql sql : {Sql("SELECT count(*) FROM setup"), Sql("SELECT count(*) FROM applied"),
                  Sql("SELECT count(*) FROM equipment"), Sql("SELECT count(*) FROM reduction"),
                  Sql("SELECT count(*) FROM revision"), Sql("SELECT count(*) FROM station")})
    CHECK(number(*store, sql) == 1);
  CHECK(number(*store, "SELECT count(*) FROM document") == 2);
  CHECK(number(*store, "SELECT count(*) FROM metric") == 3);
}

TEST_CASE("a changed limit of the same revision number is kept beside the old one") {
  const auto store = room::memory();
  room::try_board(*store, "TB3-0001", Judgement::go);
  const OpenTrial open = must(store->begin_trial(room::start("TB3-0002")));
  TrialEnd end = room::end(Judgement::go);
  end.findings[0].limit->applied.high = 0.3e-3;
  must(store->finish_trial(open, end));
  CHECK(number(*store, "SELECT count(*) FROM applied") == 2);
  CHECK(number(*store, "SELECT count(DISTINCT high) FROM results WHERE metric = 'offset' AND variant = 'x1'") == 2);
}

TEST_CASE("any one field of any one limit that changes makes another set, and the old set is found again") {
  const auto store = room::memory();
  std::vector<std::function<void(Limit&)>> changes = {
      [](Limit&) {},
      [](Limit& l) { l.specification.low = -0.6e-3; },
      [](Limit& l) { l.specification.high.reset(); },
      [](Limit& l) { l.nominal = std::numeric_limits<double>::quiet_NaN(); },
      [](Limit& l) { l.guard = Guard::typed; },
      [](Limit& l) { l.share = 0.5; },
      [](Limit& l) { l.budget_U = 21e-6; },
      [](Limit& l) { l.budget_of_reading = 1e-6; },
      [](Limit& l) { l.width = 21e-6; },
      [](Limit& l) { l.applied.low = -0.47e-3; },
      [](Limit& l) { l.applied.high.reset(); },
      [](Limit& l) { l.reason = "by agreement"; },
      [](Limit&) {}};
  for (const auto& change : changes) {
    const OpenTrial open = must(store->begin_trial(room::start("TB3-0001")));
    TrialEnd end = room::end(Judgement::go);
    change(*end.findings[1].limit);
    must(store->finish_trial(open, end));
  }
  CHECK(number(*store, "SELECT count(*) FROM applied") == 12);
  CHECK(number(*store, "SELECT applied FROM trial ORDER BY id DESC LIMIT 1") == 1);
}

TEST_CASE("simulated and measured trials don't share a store, and the error names both") {
  const auto store = room::memory();
  room::try_board(*store, "TB3-0001", Judgement::go);
  TrialStart measured = room::start("TB3-0002");
  measured.origin = Origin::measured;
  const auto refused = store->begin_trial(measured);
  REQUIRE(!refused);
  CHECK(refused.error().what ==
        "this store holds simulated trials, and this trial is measured: the two don't share a store");
  CHECK(number(*store, "SELECT count(*) FROM trial") == 1);
  CHECK(number(*store, "SELECT count(*) FROM board") == 1);
}

TEST_CASE("a refused trial leaves the store's origin as it was") {
  const auto store = room::memory();
  TrialStart measured = room::start("TB3-0001");
  measured.origin = Origin::measured;
  must(store->begin_trial(measured));
  CHECK(!store->begin_trial(room::start("TB3-0002")));
  CHECK(store->begin_trial(measured));
}

TEST_CASE("the attempt counts the board's trials") {
  const auto store = room::memory();
  CHECK(room::try_board(*store, "TB3-0001", Judgement::void_).attempt == 1);
  CHECK(room::try_board(*store, "TB3-0002", Judgement::go).attempt == 1);
  CHECK(room::try_board(*store, "TB3-0001", Judgement::go).attempt == 2);
}

TEST_CASE("a NO-GO goes on speaking for its board after a GO") {
  const auto store = room::memory();
  room::try_board(*store, "TB3-0001", Judgement::no_go);
  room::try_board(*store, "TB3-0001", Judgement::go);
  CHECK(word(*store, "SELECT judgement FROM boards") == "NO-GO");
  CHECK(number(*store, "SELECT trials FROM boards") == 2);
  CHECK(number(*store, "SELECT sum(counts) FROM trial") == 1);
}

TEST_CASE("a trial is ended once") {
  const auto store = room::memory();
  const OpenTrial open = room::try_board(*store, "TB3-0001", Judgement::no_go);
  const auto again = store->finish_trial(open, room::end(Judgement::go));
  REQUIRE(!again);
  CHECK(again.error().what == "trial " + text(open.uuid) + " is not open in this store");
  CHECK(number(*store, "SELECT judgement FROM trial") == 1);
  CHECK(number(*store, "SELECT count(*) FROM finding") == 3);
}

TEST_CASE("a trial of another store is not ended here") {
  const auto here = room::memory();
  const auto there = room::memory();
  must(here->begin_trial(room::start("TB3-0001")));
  CHECK(!here->finish_trial(must(there->begin_trial(room::start("TB3-0001"))), room::end(Judgement::go)));
  CHECK(number(*here, "SELECT state FROM trial") == 0);
}

TEST_CASE("after a write that failed, ids remembered from it are not used") {
  const auto store = room::memory();
  const OpenTrial open = must(store->begin_trial(room::start("TB3-0001")));
  TrialEnd twice = room::end(Judgement::go);
  twice.findings.push_back(twice.findings[0]);  // the same metric twice: refused by the key
  REQUIRE(!store->finish_trial(open, twice));
  CHECK(number(*store, "SELECT count(*) FROM metric") == 0);
  must(store->finish_trial(open, room::end(Judgement::go)));
  CHECK(number(*store, "SELECT count(*) FROM results") == 3);
}

TEST_CASE("a busy store is named so") {
  room::TempFolder folder;
  StoreOptions hasty;
  hasty.busy_ms = 1;
  const auto store = room::open(folder.file("s.db"), hasty);
  const auto other = room::open(folder.file("s.db"), hasty);
  Transaction held(other->database(), Transaction::Kind::write);
  const auto refused = store->begin_trial(room::start("TB3-0001"));
  REQUIRE(!refused);
  CHECK(refused.error().what == "the store can't be used: database is locked");
  CHECK(refused.error().to_do == "another program is writing to the store: wait for it, then repeat");
}
