#include "tests/db/factory.hpp"

#include <set>

#include "db/sqlite.hpp"
#include "tests/db/bare_store.hpp"
#include "tests/db/record_check.hpp"
#include "tests/db/room.hpp"

using namespace jigwright;

namespace {

/// Three orders, the last one short; the driver's reels serve 422 boards each, the third is from the second source.
const room::FactoryOptions small{3, 2100, 900, 12, 30};

}  // namespace

TEST_CASE("a reel of the factory is traced to exactly the boards that it fed, over orders") {
  const room::Factory factory(small);
  const auto store = room::memory();
  room::must(factory.enter_all(*store));
  const std::string reel = factory.reel(room::Factory::driver, 900);
  std::set<std::string> fed, traced;
  for (std::int64_t b = 0; b < factory.boards(); ++b)
    if (factory.reel(room::Factory::driver, b) == reel) fed.insert(factory.serial(b));
  for (const Carrier& carrier : room::must(store->trace_reel(reel)).boards) traced.insert(carrier.board.serial);
  CHECK(fed.size() == 422);
  CHECK(traced == fed);
}

TEST_CASE("the reels of the second source show in the findings under load, and only there") {
  room::FactoryOptions options = small;
  options.boards = 1400;
  const room::Factory factory(options);
  const auto store = room::memory();
  room::must(factory.fill(*store));
  CHECK(room::held(*store, factory).complaints.empty());
  const auto missed = [&](Sql sql) { return store->database().first(sql).value_or(-1); };
  CHECK(missed("SELECT count(DISTINCT serial) FROM results_by_reel WHERE verdict = 'missed' AND step = 'under-load' "
               "AND designator = 'U7' AND maker = 'Quay Semi'") > 50);
  CHECK(missed("SELECT count(*) FROM results_by_reel WHERE verdict = 'missed' AND designator = 'U7' AND "
               "(maker <> 'Quay Semi' OR step <> 'under-load')") == 0);
}

TEST_CASE("the same seed gives the same trial, another seed another one") {
  const room::Factory one(small), same(small);
  room::FactoryOptions other_options = small;
  other_options.seed = 4;
  const room::Factory other(other_options);
  const auto value = [](const room::Factory& f) { return f.end(17).findings[5].judged.finding.value; };
  CHECK(value(one) == value(same));
  CHECK(value(one) != value(other));
  CHECK(one.end(17).readings == same.end(17).readings);
}

TEST_CASE("the bare program of the benchmark leaves the same rows as the store") {
  room::TempFolder folder;
  room::FactoryOptions options = small;
  options.boards = 30;
  const room::Factory factory(options);
  const auto store = room::open(folder.file("s.db"));
  room::must(factory.enter_all(*store));
  {
    room::BareStore bare(folder.file("bare.db"), folder.file("s.db"));
    for (std::int64_t b = 0; b < 30; ++b) {
      const OpenTrial open = room::must(store->begin_trial(factory.start(b)));
      room::must(store->finish_trial(open, factory.end(b)));
    }
    bare.load(1, 30);
    bare.log();
    CHECK(bare.sound());
  }
  Database& db = store->database();
  db.run("ATTACH ? AS bare", folder.file("bare.db"));
  const auto differing = [&](Sql sql) { return db.first(sql).value_or(-1); };
  CHECK(differing("SELECT count(*) FROM bare.trial WHERE state = 1") == 30);
  CHECK(differing("SELECT count(*) FROM (SELECT * FROM main.finding EXCEPT SELECT * FROM bare.finding)") == 0);
  CHECK(differing("SELECT count(*) FROM (SELECT * FROM main.reading_blob EXCEPT SELECT * FROM bare.reading_blob)") ==
        0);
  CHECK(differing("SELECT count(*) FROM (SELECT * FROM main.trial EXCEPT SELECT * FROM bare.trial)") == 0);
}
