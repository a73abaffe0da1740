#include "db/audit.hpp"

#include <sqlite3.h>

#include <array>
#include <fstream>
#include <random>
#include <set>

#include "db/columns.hpp"
#include "db/journal.hpp"
#include "db/people.hpp"
#include "db/sqlite.hpp"
#include "tests/db/desk.hpp"

using namespace jigwright;
using room::must;

namespace {

using room::csv;

void add_people(Store& store) {
  const auto change = [&](const PersonChange& person) { must(change_person(store.database(), store.uuids(), person)); };
  change({"Ann", "operator", "B-1", {}, false, "B. Boss", "office", room::noon_us});
  change({"Eve", "engineer", "B-2", "tall trees", false, "B. Boss", "office", room::noon_us});
  for (const bool gone : {false, true})
    change({"Old", "operator", "B-3", {}, gone, "B. Boss", "office", room::noon_us});
}

/// Acts of every form: boards, values, a second person, what they end, the trial they are about; a feed taken back, a
/// repair's feed, a revision, and a trial under it.
void add_acts(Store& store) {
  ActRecord log_in = room::act("log-in", {});
  log_in.values = {{"wrist strap", "checked"}};
  room::write(store, log_in);
  room::write(store, room::act("log-out", {}));
  add_people(store);
  room::write(store, room::act("repair", {"TB-01"}));
  const OpenTrial miss = room::try_board(store, "TB-98", Judgement::no_go);
  room::try_board(store, "TB-98", Judgement::go);
  ActRecord review = room::act("review", {"TB-98"});
  review.trial = miss.uuid;
  room::write(store, review);
  const Uuid hold = room::hold(store, {"TB-98", "TB-99"}, "a crack");
  room::lift(store, "release", hold, {"TB-98"});
  room::hold_by(store, "reel", "R-2", {"TB-03"});
  ActRecord ship = room::act("ship", {"TB-98"});
  ship.about = "Pier Labs";
  ship.second = "Q. Lead";
  room::write(store, ship);
  ActRecord alias = room::act("alias", {"TB-03"});
  alias.about = "NEW-3";
  room::write(store, alias);
  must(
      change_reel(store.database(), store.uuids(), {"U7", "R-1", "TB-03", {}, 0, "office", "C. Clerk", room::noon_us}));
  must(add_repair_feed(store.database(), store.uuids(),
                       {"U7", "R-1", "TB-01", {}, 0, "office", "T. Technician", room::noon_us}));
  must(adopt(store.database(), store.uuids(),
             {{"[plan]", "[jig]", "[limits] 2"},
              "WO-1",
              "office",
              "E. Engineer",
              "Q. Lead",
              "tighter",
              false,
              room::noon_us}));
  room::try_board(store, "TB-02", Judgement::go);
}

/// Something in every table and nearly every column.
void fill(const std::string& path) {
  const auto store = room::open(path);
  Faults faults;
  must(store->enter(
      {csv("boards.csv",
           "order,build_no,serial,panel,product\nWO-1,1,TB-01,P-1,amp\nWO-1,2,TB-02,P-1,amp\nWO-1,3,TB-03,P-2,amp\n"),
       csv("reels.csv",
           "reel,maker,part,lot,date_code,distributor,marking,rereeled,quantity\n"
           "R-1,Alder,OA,L1,2531,Delta,K1,no,100\nR-2,Birch,OA,L2,,,,yes,\n"),
       csv("feeds.csv",
           "order,designator,reel,from,to,possible_from,possible_to\nWO-1,U7,R-1,1,1,1,2\nWO-1,U7,R-2,3,3,2,3\n")},
      room::noon_us, faults));
  REQUIRE(!faults.any());
  room::try_board(*store, "TB-01", Judgement::no_go);
  room::try_board(*store, "TB-01", Judgement::go);
  room::try_board(*store, "TB-02", Judgement::void_);
  room::try_board(*store, "TB-99", Judgement::go);  // in no list
  must(store->begin_trial(room::start("TB-03")));   // killed
  add_acts(*store);
}

struct Closing {
  void operator()(sqlite3* handle) const { sqlite3_close(handle); }
};

std::unique_ptr<sqlite3, Closing> plain(const std::string& path) {
  sqlite3* handle = nullptr;
  REQUIRE(sqlite3_open(path.c_str(), &handle) == SQLITE_OK);
  return std::unique_ptr<sqlite3, Closing>(handle);
}

/// Every row of a statement as text; an error as its message.
std::string rows(sqlite3* handle, const std::string& sql) {
  sqlite3_stmt* statement = nullptr;
  if (sqlite3_prepare_v2(handle, sql.c_str(), -1, &statement, nullptr) != SQLITE_OK) return sqlite3_errmsg(handle);
  std::string out;
  int code = 0;
  while ((code = sqlite3_step(statement)) == SQLITE_ROW)
    for (int i = 0; i < sqlite3_column_count(statement); ++i) {
      const void* bytes = sqlite3_column_blob(statement, i);
      const auto length = static_cast<std::size_t>(sqlite3_column_bytes(statement, i));
      out += std::to_string(sqlite3_column_type(statement, i)) + ':';
      if (bytes != nullptr) out.append(static_cast<const char*>(bytes), length);
      out += '\n';
    }
  if (code != SQLITE_DONE) out += sqlite3_errmsg(handle);
  sqlite3_finalize(statement);
  return out;
}

void add(std::string& out, const BoardShown& shown) {
  for (const ShownTrial& t : shown.trials) {
    out += text(t.uuid) + std::to_string(t.attempt) + std::to_string(t.counts) + std::to_string(t.open) +
           std::to_string(static_cast<int>(t.origin)) + std::to_string(t.at_us) + ' ' +
           std::to_string(t.took_ms.value_or(-1)) + t.operator_name + t.station + t.program + t.plan + t.limit_set +
           t.depth + std::to_string(t.nest) + ' ' + std::to_string(t.limit_revision) +
           std::to_string(static_cast<int>(t.judgement)) + t.void_reason + t.unsafe + t.deciding.value_or("none") +
           std::to_string(t.ambient_C.value_or(-1)) + ' ' + std::to_string(t.missed) + ' ' +
           std::to_string(t.adopted.value_or(-1)) + '\n';
    for (const ShownFinding& f : t.findings) {
      out +=
          label(f.metric.name) + std::string(symbol(f.metric.unit)) + std::to_string(static_cast<int>(f.metric.about));
      const Finding& x = f.judged.finding;
      for (double v : {x.value, x.u, f.judged.margin}) out.append(reinterpret_cast<const char*>(&v), sizeof v);
      out += std::to_string(x.n) + std::to_string(static_cast<int>(x.state)) +
             std::to_string(static_cast<int>(f.judged.verdict));
      if (!f.limit) continue;
      const Limit& l = *f.limit;
      for (double v : {l.specification.low.value_or(9), l.specification.high.value_or(9), l.nominal, l.share,
                       l.budget_U, l.budget_of_reading, l.width, l.applied.low.value_or(9), l.applied.high.value_or(9)})
        out.append(reinterpret_cast<const char*>(&v), sizeof v);
      out += std::to_string(static_cast<int>(l.guard)) + l.reason + '\n';
    }
  }
}

void add(std::string& out, const MetricColumns& columns) {
  for (std::size_t i = 0; i < columns.trials.size(); ++i) {
    out.append(reinterpret_cast<const char*>(&columns.values[i]), sizeof(double));
    out += std::to_string(columns.trials[i]) + ' ' + std::to_string(static_cast<int>(columns.states[i])) +
           std::to_string(static_cast<int>(columns.verdicts[i])) + std::to_string(columns.firsts[i]) + '\n';
  }
}

void add(std::string& out, const BoardNow& b) {
  out += b.serial + ' ' + b.scanned + ' ' + std::to_string(b.known) + b.order + ' ' + b.product +
         std::to_string(b.build_no.value_or(-1)) + ' ' + std::string(word(b.standing.state())) + b.shipped_to + ' ' +
         std::to_string(static_cast<int>(b.standing.judgement().value_or(Judgement::void_))) +
         std::to_string(b.standing.trials()) + ' ' + std::to_string(b.standing.trials_since_repair()) + ' ' +
         sentence(b.standing.may_try(1), b) + sentence(b.standing.may_ship(), b) + text(Uuid{}) + '\n';
  for (const HoldOn& h : b.holds)
    out += text(h.uuid) + h.who + ' ' + h.reason + ' ' + h.about + ' ' + std::to_string(h.at_us) + '\n';
}

void add(std::string& out, const ActRecord& a) {
  out += text(a.uuid) + a.kind + ' ' + a.station + ' ' + std::to_string(a.at_us) + a.who + ' ' + a.second + ' ' +
         a.reason + ' ' + a.about + ' ' + (a.ends ? text(*a.ends) : "") + ' ' + (a.trial ? text(*a.trial) : "") + '\n';
  for (const std::string& serial : a.boards) out += serial + ' ';
  for (const auto& [key, value] : a.values) out += key + '=' + value + ' ';
}

void add(std::string& out, const Adopted& a) {
  out += std::to_string(a.number) + a.order + ' ' + a.plan + a.jig + a.limits + a.parent + a.authority + ' ' +
         std::to_string(a.earlier_stand) + a.who + ' ' + a.second + ' ' + a.reason + std::to_string(a.at_us) + '\n';
}

/// Acts of every kind, what they make of boards and people, what is in force, who did what.
void add_acts(std::string& out, Database& db) {
  for (const char* kind :
       {"log-in", "log-out", "hold", "release", "review", "repair", "ship", "alias", "adopt", "person"})
    for (const ActRecord& a : acts_of(db, kind)) add(out, a);
  for (const char* serial : {"TB-01", "TB-02", "TB-03", "TB-98", "TB-99", "NEW-3"}) {
    const auto read = board_now(db, serial);
    read.ok() ? add(out, read.value()) : void(out += describe(read.error()));
  }
  for (const PersonNow& p : all_people(db))
    out += p.name + ' ' + p.role + ' ' + p.badge + ' ' + p.password + std::to_string(p.gone) + '\n';
  out += std::to_string(has_engineers(db));
  for (const Adopted& a : all_adopted(db)) add(out, a);
  if (const auto in_force = adopted_for(db, "WO-1")) add(out, *in_force);
  const auto log = read_log(db, {}, 100);
  if (!log.ok()) return void(out += describe(log.error()));
  for (const LogLine& l : log.value())
    out += l.station + std::to_string(l.epoch) + ' ' + std::to_string(l.seq) + ' ' + std::to_string(l.at_us) + l.who +
           ' ' + l.what + ' ' + l.on + '\n';
}

/// What every question and every view says: trials, findings, limits; carriers; the files' text and readings too.
std::string answers(const std::string& path) {
  std::string out;
  {
    const auto handle = plain(path);
    for (const char* view : {"boards", "results", "results_by_reel", "carries"})
      out += rows(handle.get(), std::string("SELECT * FROM ") + view + " ORDER BY 1, 2, 3, 4, 5, 6, 7, 8");
    out += rows(handle.get(),
                "SELECT r.name, l.maker, l.part, l.lot, r.date_code, r.distributor, r.rereeled, r.quantity, r.marking "
                "FROM reel r JOIN lot l ON l.id = r.lot ORDER BY 1");
    out += rows(handle.get(),
                "SELECT t.uuid, d.kind, d.body FROM trial t JOIN setup_document s ON s.setup = t.setup JOIN document d "
                "ON d.id = s.document ORDER BY 1, 2");
    out += rows(handle.get(),
                "SELECT t.uuid, b.format, b.body FROM trial t JOIN reading_blob b ON b.trial = t.id ORDER BY 1");
    out += rows(
        handle.get(),
        "SELECT t.uuid, i.instrument, i.maker, i.model, i.serial, i.firmware FROM trial t JOIN equipment_instrument "
        "e ON e.equipment = t.equipment JOIN instrument i ON i.id = e.instrument ORDER BY 1, 2, 3, 4");
    out += rows(handle.get(),
                "SELECT t.uuid, s.kind, s.version FROM trial t JOIN reduction_step s ON s.reduction = t.reduction "
                "ORDER BY 1, 2");
    out += rows(handle.get(),
                "SELECT f.uuid, f.dropped_us, e.uuid, e.kind, e.name, e.who FROM feed f LEFT JOIN entered e ON "
                "e.id = f.dropped_by ORDER BY 1");
  }
  StoreOptions reading;
  reading.access = StoreOptions::Access::read;
  auto store = Store::open(path, reading);
  if (!store) return out + describe(store.error());
  for (const char* serial : {"TB-01", "TB-02", "TB-03", "TB-99"}) {
    const auto shown = store.value()->show(serial);
    shown.ok() ? add(out, shown.value()) : void(out += describe(shown.error()));
  }
  for (const auto& [step, name, variant] :
       {std::array{"offset", "offset", "x1"}, std::array{"offset", "offset", "x10"}, std::array{"known", "zero", ""}}) {
    const auto read = read_metric(store.value()->database(), step, name, variant);
    read.ok() ? add(out, read.value()) : void(out += describe(read.error()));
  }
  add_acts(out, store.value()->database());
  return out;
}

/// The audit's verdict: true = whole. A store that can't be opened is told of as well.
bool passes(const std::string& path) {
  StoreOptions reading;
  reading.access = StoreOptions::Access::read;
  auto store = Store::open(path, reading);
  if (!store) return false;
  const auto report = audit(store.value()->database());
  return report.ok() && report.value().whole();
}

std::string bytes_of(const std::string& path) {
  std::ifstream in(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), {}};
}
void put(const std::string& path, const std::string& bytes) {
  for (const char* beside : {"-wal", "-shm"}) std::filesystem::remove(path + beside);
  std::ofstream(path, std::ios::binary) << bytes;
}

/// Changes one value by plain SQL and audits; nothing is asked of the rest of the store.
AuditReport after(const std::string& sql) {
  room::TempFolder folder;
  fill(folder.file("s.db"));
  const auto handle = plain(folder.file("s.db"));
  REQUIRE(sqlite3_exec(handle.get(), sql.c_str(), nullptr, nullptr, nullptr) == SQLITE_OK);
  return must(audit(room::open(folder.file("s.db"))->database()));
}

const Difference& only_record(const AuditReport& report) {
  for (const Difference& d : report.differences)
    if (!d.record.empty()) return d;
  FAIL("no record is named");
  return report.differences[0];
}

}  // namespace

TEST_CASE("a store as the program made it is whole, and the page's figures are its own") {
  room::TempFolder folder;
  fill(folder.file("s.db"));
  const auto report = must(audit(room::open(folder.file("s.db"))->database()));
  for (const Difference& d : report.differences) FAIL_CHECK(d.what);
  CHECK(report.whole());
  CHECK(report.records == 26);  // 3 lists, 2 feeds, 7 trials, 14 acts
  CHECK(report.trials == 7);
  CHECK(report.open == 1);
  CHECK(report.lists == 5);
  CHECK(report.acts == 14);
  CHECK(report.findings == 21);
  REQUIRE(report.heads.size() == 3);  // "station" entered the lists, "bench 1" tried, the office did the rest
  CHECK(report.heads[0].hash.size() == 32);
}

TEST_CASE("values that SQLite gives back otherwise than they went in are whole: NaN, -0, whole numbers, infinity") {
  const auto store = room::memory();
  const OpenTrial open = must(store->begin_trial(room::start("TB-01")));
  TrialEnd end = room::end(Judgement::go, -0.0);
  end.findings[1].judged.finding.value = end.findings[1].judged.finding.u = 0;
  end.findings[1].judged.margin = margin(*end.findings[1].limit, 0);
  end.findings[2].judged.finding.value = -std::numeric_limits<double>::infinity();
  for (double value : {-0.0, 5.0, std::numeric_limits<double>::quiet_NaN()}) {
    FindingRow row = end.findings[2];
    row.metric.name.variant = std::to_string(value);
    row.judged.finding.value = value;
    end.findings.push_back(row);
  }
  must(store->finish_trial(open, end));
  const auto report = must(audit(store->database()));
  for (const Difference& d : report.differences) FAIL_CHECK(d.what);
  CHECK(report.findings == 6);
}

TEST_CASE("an empty store is whole and has no head") {
  const auto report = must(audit(room::memory()->database()));
  CHECK(report.whole());
  CHECK(report.heads.empty());
}

TEST_CASE("a changed finding is named by its trial, serial and place in the chain") {
  const AuditReport report = after("UPDATE finding SET value = 0.0001 WHERE trial = 1 AND metric = 1");
  const Difference& d = only_record(report);
  CHECK(d.record == "trial");
  CHECK(d.on == "TB-01");
  CHECK(d.station == "bench 1");
  CHECK(d.epoch == 1);
  CHECK(d.seq == 1);
  CHECK(d.what == "the rows are not what was recorded");
}

TEST_CASE("a changed limit shows at the first trial that it judged") {
  CHECK(only_record(after("UPDATE applied_limit SET high = 1")).seq == 1);
}

TEST_CASE("a changed line of a list is named by the file that brought it") {
  const Difference d = only_record(after("UPDATE feed SET reel = 2 WHERE id = 1"));
  CHECK(d.record == "list entered");
  CHECK(d.on == "feeds.csv");
}

TEST_CASE("a record taken out of the chain shows at the one after it") {
  const Difference d = only_record(after("DELETE FROM journal WHERE station = 2 AND seq = 2"));
  CHECK(d.seq == 3);
  CHECK(d.what == "record 2 is missing before it");
}

TEST_CASE("a record rewritten with a hash of its own breaks the chain after it") {
  const AuditReport report = after("UPDATE journal SET hash = zeroblob(32) WHERE station = 2 AND seq = 3");
  const Difference& d = only_record(report);
  CHECK(d.seq == 3);
  CHECK(d.what == "its hash does not follow from the record and the hash before it");
}

TEST_CASE("a trial put in behind the journal's back has no record") {
  const AuditReport report = after(
      "INSERT INTO trial(uuid, board, station, nest, at_us, state, judgement, origin, attempt, counts, setup, "
      "revision, depth) SELECT zeroblob(16), board, station, 1, at_us, 1, 0, 1, 3, 0, setup, revision, '' FROM trial "
      "WHERE id = 2");
  REQUIRE(report.found == 1);
  CHECK(report.differences[0].what == "a trial of board TB-01 has no record");
}

TEST_CASE("a trial marked to speak for its board in place of a NO-GO shows") {
  const AuditReport report = after(
      "UPDATE trial SET counts = 2 - id WHERE board = (SELECT id FROM board WHERE serial = 'TB-01'); UPDATE trial SET "
      "counts = 1 - counts WHERE id < 3");
  REQUIRE(report.found == 1);
  CHECK(report.differences[0].what == "board TB-01: the trial that speaks for it is marked wrongly");
}

TEST_CASE("an act moved to another place among its board's trials shows") {
  CHECK(only_record(after("UPDATE act_board SET attempts = 1 WHERE attempts = 2")).record == "act");
  const AuditReport report = after("UPDATE act_board SET attempts = attempts + 1");
  CHECK(report.found >= 6);  // each act that names boards
}

TEST_CASE("a foreign trigger and a changed view show") {
  const AuditReport report = after(
      "CREATE TRIGGER t AFTER INSERT ON trial BEGIN SELECT 1; END; DROP VIEW carries; CREATE VIEW carries AS SELECT 1");
  REQUIRE(report.found == 2);
  CHECK(report.differences[0].what == "the schema's text differs for the view carries on carries");
  CHECK(report.differences[1].what == "the schema has a foreign trigger t on trial");
}

TEST_CASE("any single value changed in any column, if it changes an answer, shows") {
  room::TempFolder folder;
  const std::string path = folder.file("s.db");
  fill(path);
  const std::string whole = bytes_of(path), before = answers(path);
  REQUIRE(passes(path));
  int changed = 0, told = 0, columns = 0;
  std::set<std::string> told_of;
  std::vector<std::pair<std::string, std::string>> places;
  {
    const auto handle = plain(path);
    sqlite3_stmt* names = nullptr;
    REQUIRE(sqlite3_prepare_v2(handle.get(),
                               "SELECT t.name, c.name FROM sqlite_schema t JOIN pragma_table_info(t.name) c WHERE "
                               "t.type = 'table'",
                               -1, &names, nullptr) == SQLITE_OK);
    while (sqlite3_step(names) == SQLITE_ROW)
      places.emplace_back(reinterpret_cast<const char*>(sqlite3_column_text(names, 0)),
                          reinterpret_cast<const char*>(sqlite3_column_text(names, 1)));
    sqlite3_finalize(names);
  }
  for (const auto& [table, column] : places) {
    ++columns;
    // The first row's value becomes another of its type, or NULL: whichever the table's rules let through.
    for (const char* to :
         {"CASE typeof(X) WHEN 'text' THEN X || 'x' WHEN 'blob' THEN CAST(X || x'00' AS BLOB) WHEN 'null' "
          "THEN NULL ELSE X + 1 END",
          "NULL", "1", "''"}) {
      put(path, whole);
      std::string value = to;
      for (std::size_t at; (at = value.find('X')) != std::string::npos;) value.replace(at, 1, "\"" + column + "\"");
      bool done = false;
      {
        const auto handle = plain(path);
        const std::string sql = "UPDATE OR IGNORE " + table + " SET \"" + column + "\" = " + value + " WHERE (\"" +
                                column + "\") IN (SELECT \"" + column + "\" FROM " + table + " WHERE \"" + column +
                                "\" IS NOT NULL LIMIT 1) OR \"" + column + "\" IS NULL";
        done = sqlite3_exec(handle.get(), sql.c_str(), nullptr, nullptr, nullptr) == SQLITE_OK &&
               sqlite3_changes(handle.get()) > 0;
      }
      if (!done || answers(path) == before) continue;
      // A restored store has no password that was set after the backup; who has none may do nothing.
      if (table == "credential" && column == "password" && (value == "NULL" || value == "''")) continue;
      ++changed;
      CAPTURE(table);
      CAPTURE(column);
      CAPTURE(value);
      const bool whole_still = passes(path);
      CHECK(!whole_still);
      told += whole_still ? 0 : 1;
      if (!whole_still) told_of.insert(table + "." + column);
    }
  }
  for (const std::string must_be :
       {"act.uuid",        "act.station",     "act.kind",           "act.at_us",        "act.who",
        "act.second",      "act.reason",      "act.about",          "act.ends",         "act.trial",
        "act_board.act",   "act_board.board", "act_board.attempts", "act_value.act",    "act_value.key",
        "act_value.value", "credential.name", "credential.role",    "credential.badge", "credential.password",
        "credential.gone", "feed.dropped_us", "feed.dropped_by",    "trial.adopted"}) {
    CAPTURE(must_be);
    CHECK(told_of.contains(must_be));
  }
  MESSAGE(columns, " columns, ", changed, " changes that alter an answer, ", told, " told of");
  CHECK(changed > 130);
}

/// Small pages, so that most bytes of the file are in use.
void pack(const std::string& path) {
  const auto handle = plain(path);
  REQUIRE(sqlite3_exec(handle.get(),
                       "PRAGMA journal_mode = DELETE; PRAGMA page_size = 512; VACUUM; PRAGMA journal_mode = WAL",
                       nullptr, nullptr, nullptr) == SQLITE_OK);
}

/// Changes single bytes, one at a time, until so many of them have changed an answer; each of those must show.
/// @param places  where to choose from
void change_bytes(const std::string& path, const std::vector<std::size_t>& places, int wanted) {
  const std::string whole = bytes_of(path), before = answers(path);
  REQUIRE(passes(path));
  std::mt19937_64 random(20260109);  // fixed, so that a failure can be repeated
  int tried = 0, altered = 0, told = 0;
  for (; altered < wanted && tried < 20 * wanted; ++tried) {
    std::string bytes = whole;
    const std::size_t at = places[random() % places.size()];
    const auto flip = static_cast<unsigned char>(1 + random() % 255);
    bytes[at] = static_cast<char>(static_cast<unsigned char>(bytes[at]) ^ flip);
    put(path, bytes);
    if (answers(path) == before) continue;
    put(path, bytes);
    ++altered;
    const bool whole_still = passes(path);
    told += whole_still ? 0 : 1;
    CAPTURE(at);
    CAPTURE(static_cast<int>(flip));
    CHECK(!whole_still);
  }
  put(path, whole);
  MESSAGE(altered, " of ", tried, " bytes altered an answer, ", told, " told of");
  CHECK(altered == wanted);
}

std::vector<std::size_t> every_place(const std::string& path) {
  std::vector<std::size_t> out(bytes_of(path).size());
  for (std::size_t i = 0; i < out.size(); ++i) out[i] = i;
  return out;
}

TEST_CASE("any of 900 single bytes of the file that changes an answer shows") {
  room::TempFolder folder;
  const std::string path = folder.file("s.db");
  fill(path);
  pack(path);
  change_bytes(path, every_place(path), 900);
}

/// The least trials that have column blocks.
void fill_with_blocks(const std::string& path) {
  const auto store = room::open(path);
  TrialEnd end = room::end(Judgement::go);
  for (int i = 0; i <= stretch_trials; ++i) {
    end.findings[0].judged.finding.value = i * 0.5e-6;
    end.findings[0].judged.margin = margin(*end.findings[0].limit, i * 0.5e-6);
    must(store->finish_trial(must(store->begin_trial(room::start("TB-0" + std::to_string(i % 7)))), end));
  }
  store->upkeep();
}

/// Where the bodies of column blocks lie: their pages follow no other in the file, so the bytes are looked for in
/// parts.
std::vector<std::size_t> places_of_blocks(const std::string& path) {
  std::vector<std::size_t> out;
  const std::string whole = bytes_of(path);
  const auto handle = plain(path);
  const std::string bodies = rows(handle.get(), "SELECT body FROM column_block");
  for (std::size_t page = 0; page + 512 <= whole.size(); page += 512)
    if (bodies.find(whole.substr(page + 4, 100)) != std::string::npos)  // of an overflow page, behind its link
      for (std::size_t i = 0; i < 512; ++i) out.push_back(page + i);
  return out;
}

TEST_CASE("any of 100 single bytes that changes an answer shows in a store with column blocks, half of them there") {
  room::TempFolder folder;
  const std::string path = folder.file("s.db");
  fill_with_blocks(path);
  pack(path);
  const auto blocks = places_of_blocks(path);
  REQUIRE(blocks.size() > 20 * 512);
  change_bytes(path, blocks, 50);
  change_bytes(path, every_place(path), 50);
}
