#include "db/columns.hpp"

#include <bit>
#include <limits>

#include "db/audit.hpp"
#include "db/sqlite.hpp"
#include "tests/db/factory.hpp"
#include "tests/db/room.hpp"

using namespace jigwright;
using room::must;

namespace {

/// So many trials of ten findings and hardly any readings, of boards of their own.
room::Factory factory(std::int64_t boards) {
  room::FactoryOptions options;
  options.boards = boards;
  options.findings = 10;
  options.readings = 2;
  return room::Factory(options);
}

void log(Store& store, const room::Factory& made, std::int64_t first, std::int64_t last) {
  for (std::int64_t board = first; board <= last; ++board)
    must(store.finish_trial(must(store.begin_trial(made.start(board))), made.end(board)));
}

std::int64_t blocks(Store& store) {
  return store.database().first("SELECT count(*) FROM column_block").value_or(-1);
}

/// A line a finding: trial, bits of the value, state, verdict, first.
using Lines = std::vector<std::string>;

std::string line(std::int64_t trial, double value, std::int64_t state, std::int64_t verdict, bool first) {
  const std::string bits = std::isnan(value) ? "none" : std::to_string(std::bit_cast<std::uint64_t>(value));
  return std::to_string(trial) + " " + bits + " " + std::to_string(state) + " " + std::to_string(verdict) +
         (first ? " first" : "");
}

Lines lines(const MetricColumns& columns) {
  Lines out;
  for (std::size_t i = 0; i < columns.trials.size(); ++i)
    out.push_back(line(columns.trials[i], columns.values.at(i), static_cast<int>(columns.states.at(i)),
                       static_cast<int>(columns.verdicts.at(i)), columns.firsts.at(i) != 0));
  return out;
}

Lines by_sql(Store& store, std::int64_t metric) {
  Lines out;
  Query q = store.database().query(
      "SELECT f.trial, f.value, f.state, f.verdict, t.attempt FROM finding f JOIN trial t ON t.id = f.trial WHERE "
      "f.metric = ? ORDER BY f.trial",
      metric);
  while (q.next()) out.push_back(line(q.integer(0), q.real(1), q.integer(2), q.integer(3), q.integer(4) == 1));
  return out;
}

std::int64_t metrics(Store& store) {
  return store.database().first("SELECT max(id) FROM metric").value_or(0);
}

/// Every metric, as read_columns() gives it, against plain SQL.
void check_all(Store& store) {
  for (std::int64_t metric = 1; metric <= metrics(store); ++metric) {
    CAPTURE(metric);
    const Lines read = lines(must(read_columns(store.database(), metric))), expected = by_sql(store, metric);
    CHECK(read.size() == expected.size());
    const bool same = read == expected;
    CHECK(same);
  }
}

std::vector<std::string> differences(Store& store) {
  std::vector<std::string> out;
  check_blocks(store.database(), [&](std::string what) { out.push_back(std::move(what)); });
  return out;
}

int keep(Store& store, int most = 1000) {
  return must(ColumnKeeper(store.database()).upkeep(most));
}

}  // namespace

TEST_CASE("each metric read from blocks is what plain SQL over the rows gives, retrials and all") {
  const auto store = room::memory();
  const auto made = factory(1100);
  log(*store, made, 0, 599);
  log(*store, made, 20, 39);  // tried again
  log(*store, made, 600, 1099);
  CHECK(keep(*store) == 2);
  CHECK(blocks(*store) == 20);
  check_all(*store);
  CHECK(differences(*store).empty());
  const auto columns = must(read_columns(store->database(), 1));
  CHECK(columns.firsts.at(599) == 1);
  CHECK(columns.firsts.at(600) == 0);  // trial 601, the board's second
}

TEST_CASE("a store without blocks reads the same from its rows") {
  const auto store = room::memory();
  log(*store, factory(1100), 0, 1099);
  CHECK(blocks(*store) == 0);
  check_all(*store);
}

TEST_CASE("a stretch gets its blocks once a trial beyond it stands") {
  const auto store = room::memory();
  const auto made = factory(600);
  ColumnKeeper keeper(store->database());
  log(*store, made, 0, 511);
  CHECK(must(keeper.upkeep(10)) == 0);
  log(*store, made, 512, 512);
  CHECK(must(keeper.upkeep(10)) == 1);
  CHECK(must(keeper.upkeep(10)) == 0);
  CHECK(blocks(*store) == 10);
  check_all(*store);
}

TEST_CASE("a stretch with an open trial waits for it; one cut short has no findings") {
  const auto store = room::memory();
  const auto made = factory(1100);
  ColumnKeeper keeper(store->database());
  log(*store, made, 0, 99);
  const OpenTrial open = must(store->begin_trial(made.start(100)));
  const OpenTrial cut = must(store->begin_trial(made.start(101)));
  log(*store, made, 102, 600);
  CHECK(must(keeper.upkeep(10)) == 0);
  CHECK(blocks(*store) == 0);
  check_all(*store);
  must(store->finish_trial(open, made.end(100)));
  store->database().run("UPDATE trial SET state = 2, mark = NULL WHERE id = ?", cut.id);
  log(*store, made, 601, 1050);
  CHECK(must(keeper.upkeep(10)) == 2);
  CHECK(blocks(*store) == 20);
  check_all(*store);
  CHECK(differences(*store).empty());
}

TEST_CASE("a block of a stretch that has not ended is told of, and not read") {
  const auto store = room::memory();
  const auto made = factory(600);
  log(*store, made, 0, 520);
  keep(*store);
  store->database().run("UPDATE column_block SET stretch = 1 WHERE metric = 3");
  check_all(*store);
  REQUIRE(differences(*store).size() == 1);
  CHECK(differences(*store)[0] ==
        "the column block of noise: offset (x1 with load 2), trials 513 to 1024: it is not what the findings give");
}

TEST_CASE("blocks of the newest stretch are told of, even where they are what its findings give so far") {
  const auto store = room::memory();
  log(*store, factory(600), 0, 512);
  keep(*store);
  CHECK(differences(*store).empty());
  store->database().script(
      "DELETE FROM finding WHERE trial = 513; DELETE FROM reading_blob WHERE trial = 513; DELETE FROM trial WHERE id = "
      "513");
  CHECK(differences(*store).size() == 10);
  check_all(*store);
}

TEST_CASE("any block may be deleted: it is read from the rows, and built again") {
  const auto store = room::memory();
  log(*store, factory(1600), 0, 1599);
  CHECK(keep(*store) == 3);
  store->database().run("DELETE FROM column_block WHERE metric = 4 AND stretch = 1");
  store->database().run("DELETE FROM column_block WHERE metric = 5");
  store->database().run("DELETE FROM column_block WHERE stretch = 2");
  check_all(*store);
  CHECK(differences(*store).empty());
  CHECK(keep(*store, 2) == 2);
  CHECK(keep(*store) == 1);
  CHECK(blocks(*store) == 30);
  store->database().run("DELETE FROM column_block");
  check_all(*store);
  CHECK(keep(*store) == 3);
  check_all(*store);
}

TEST_CASE("a metric that came later has no block before it, and its own may be deleted too") {
  const auto store = room::memory();
  const auto made = factory(1600);
  log(*store, made, 0, 699);
  for (std::int64_t board = 700; board < 1600; ++board) {
    TrialEnd end = made.end(board);
    end.findings.push_back(end.findings[0]);
    end.findings.back().metric.name.variant = "x11 with load 0";
    if (board % 3 == 0) end.findings.erase(end.findings.begin() + 2);
    must(store->finish_trial(must(store->begin_trial(made.start(board))), end));
  }
  CHECK(keep(*store) == 3);
  CHECK(blocks(*store) == 32);
  check_all(*store);
  store->database().run("DELETE FROM column_block WHERE metric = 11 AND stretch = 1");
  check_all(*store);
  CHECK(differences(*store).empty());
}

TEST_CASE("values, states and verdicts of every kind go through a block: NaN, infinity, none at all") {
  const auto store = room::memory();
  const double values[] = {0.0,
                           -0.0,
                           5.0,
                           -1e300,
                           4e-324,
                           std::numeric_limits<double>::infinity(),
                           -std::numeric_limits<double>::infinity(),
                           std::numeric_limits<double>::quiet_NaN()};
  for (int i = 0; i < 520; ++i) {
    TrialEnd end = room::end(Judgement::void_);
    Judged& judged = end.findings[0].judged;
    judged.finding.value = values[i % 8];
    judged.finding.state = static_cast<FindingState>(i % 5);
    judged.verdict = static_cast<Verdict>(i % 6);
    judged.margin = std::numeric_limits<double>::quiet_NaN();
    if (i % 7 == 0) end.findings.erase(end.findings.begin() + 1);
    must(store->finish_trial(must(store->begin_trial(room::start("TB-" + std::to_string(i % 300)))), end));
  }
  const Lines before = lines(must(read_columns(store->database(), 1)));
  CHECK(keep(*store) == 1);
  check_all(*store);
  CHECK(lines(must(read_columns(store->database(), 1))) == before);
  CHECK(differences(*store).empty());
}

TEST_CASE("a changed block changes what is read, and is named by its metric and trials") {
  const auto store = room::memory();
  log(*store, factory(600), 0, 519);
  keep(*store);
  // The last value's low byte: 512 marks stand behind it.
  store->database().run(
      "UPDATE column_block SET body = CAST(substr(body, 1, length(body) - 520) || x'55' || substr(body, -519) AS BLOB) "
      "WHERE metric = 2");
  CHECK(lines(must(read_columns(store->database(), 2))) != by_sql(*store, 2));
  REQUIRE(differences(*store).size() == 1);
  CHECK(differences(*store)[0] ==
        "the column block of gain: offset (x1 with load 1), trials 1 to 512: it is not what the findings give");
  const auto report = must(audit(store->database()));
  REQUIRE(report.found == 1);
  CHECK(report.differences[0].what == differences(*store)[0]);
}

TEST_CASE("a damaged block is read from the rows, and told of") {
  for (const char* damage :
       {"substr(body, 1, 900)", "x''", "x'01'", "CAST(body || x'00' AS BLOB)", "CAST(x'02' || substr(body, 2) AS BLOB)",
        "CAST(substr(body, 1, length(body) - 1) || x'ff' AS BLOB)", "zeroblob(length(body))"}) {
    CAPTURE(damage);
    const auto store = room::memory();
    log(*store, factory(600), 0, 513);
    keep(*store);
    store->database().script((std::string("UPDATE column_block SET body = ") + damage + " WHERE metric < 3").c_str());
    check_all(*store);
    CHECK(differences(*store).size() == 2);
  }
}

TEST_CASE("a block of no metric is told of") {
  const auto store = room::memory();
  log(*store, factory(600), 0, 513);
  keep(*store);
  store->database().script("PRAGMA foreign_keys = OFF");
  store->database().run("UPDATE column_block SET metric = 99 WHERE metric = 1");
  REQUIRE(differences(*store).size() == 1);
  CHECK(differences(*store)[0] == "1 column blocks belong to no metric or trial");
}

TEST_CASE("upkeep that can't write is tried again later, and the trials between stand") {
  room::TempFolder folder;
  StoreOptions impatient;
  impatient.busy_ms = 0;
  const auto store = room::open(folder.file("s.db"), impatient);
  const auto made = factory(600);
  log(*store, made, 0, 512);
  {
    const auto other = must(Database::open(folder.file("s.db"), Database::Access::write, false, 0));
    Transaction held(*other, Transaction::Kind::write);
    store->upkeep();
    CHECK(blocks(*store) == 0);
  }
  log(*store, made, 513, 514);
  CHECK(blocks(*store) == 0);
  log(*store, made, 0, 511);
  store->upkeep();
  CHECK(blocks(*store) == 20);
  CHECK(differences(*store).empty());
}

TEST_CASE("a metric is read by its name, and by its unit where that was changed") {
  const auto store = room::memory();
  for (const Unit unit : {Unit::volt, Unit::ratio}) {
    TrialEnd end = room::end(Judgement::go);
    end.findings[1].metric.unit = unit;
    end.findings[1].judged.finding.value = unit == Unit::volt ? 1 : 2;
    must(store->finish_trial(must(store->begin_trial(room::start("TB-01"))), end));
  }
  Database& database = store->database();
  CHECK(must(read_metric(database, "offset", "offset", "x1")).values.size() == 2);
  CHECK(must(read_metric(database, "offset", "offset", "x10")).values == std::vector<double>{2});
  CHECK(must(read_metric(database, "offset", "offset", "x10", Unit::volt)).values == std::vector<double>{1});
  const auto none = read_metric(database, "offset", "offset", "x10", Unit::ohm);
  REQUIRE(!none.ok());
  CHECK(none.error().kind == Error::Kind::usage);
}

TEST_CASE("an unknown step, metric or variant names the nearest one, or the few there are") {
  const auto store = room::memory();
  room::try_board(*store, "TB-01", Judgement::go);
  const auto told = [&](const char* step, const char* name, const char* variant) {
    const auto read = read_metric(store->database(), step, name, variant);
    return read.ok() ? "read" : describe(read.error());
  };
  CHECK(told("ofset", "offset", "x1") ==
        "no finding of a step \"ofset\" is on record (:memory:): did you mean \"offset\"?");
  CHECK(told("wobble", "offset", "x1") ==
        "no finding of a step \"wobble\" is on record (:memory:): known are known, offset");
  CHECK(told("offset", "offse", "x1") ==
        "step \"offset\" has no metric \"offse\" (:memory:): did you mean \"offset\"?");
  CHECK(told("offset", "offset", "x100") == "offset: offset has no variant \"x100\" (:memory:): did you mean \"x10\"?");
}
