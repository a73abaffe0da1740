// Trials in a real store, worked out again from what stands there.
#include "sequencer/recompute.hpp"

#include <doctest/doctest.h>

#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <filesystem>

#include "db/readings_archive.hpp"
#include "db/sqlite.hpp"
#include "db/store.hpp"
#include "sample_trials.hpp"

using namespace jigwright;
using namespace jigwright::test;
namespace fs = std::filesystem;

namespace {

/// A store of its own with a few trials: sound, weak, with a fault of the jig, stopped.
class Recorded {
 public:
  Recorded() {
    folder_ = fs::temp_directory_path() / fs::path("jigwright-recompute-XXXXXX");
    std::string name = folder_.string();
    REQUIRE(::mkdtemp(name.data()) != nullptr);
    folder_ = name;
    auto opened = Store::open((folder_ / "results.db").string());
    REQUIRE(opened.ok());
    store_ = std::move(opened.value());
    try_board("TB3-0001", {});
    try_board("TB3-0180", {});
    try_board("TB3-0002", {"load-missing:1 nF"});
    try_board("TB3-0003", {"meter-silent-after=300"});
    try_board("TB3-0004", {"output-at-rail"});
  }
  ~Recorded() {
    store_.reset();
    std::error_code ignored;
    fs::remove_all(folder_, ignored);
  }
  Database& database() { return store_->database(); }
  std::string file(const std::string& name) const { return (folder_ / name).string(); }
  Recomputed again() {
    const auto out = recompute_all(database(), {});
    REQUIRE(out.ok());
    return out.value();
  }

 private:
  void try_board(const std::string& serial, std::vector<std::string> faults) {
    asio::io_context io{1};
    const auto clock = make_virtual_clock();
    const SimulatedOptions options(1, std::move(faults));
    const auto bench = make_simulated_bench(plan_b()->jig, scenario(), *clock, options);
    const auto recorder = make_recorder(*store_, *clock, io);
    Silent silent;
    Nobody nobody;
    TrialSetup setup;
    setup.station = "bench 1";
    setup.origin = Origin::simulated;
    Trials trials(io, *bench, plan_b(), silent, nobody, *recorder, setup);
    auto one = [&]() -> Task<void> { co_await trials.run(1, serial, "WO-1041"); };
    asio::co_spawn(io, one(), asio::detached);
    clock->run(io);
  }

  fs::path folder_;
  std::unique_ptr<Store> store_;
};

}  // namespace

TEST_CASE("every stored trial is worked out again and agrees") {
  Recorded store;
  const Recomputed r = store.again();
  CHECK_MESSAGE(r.differ == 0, r.first_difference);
  CHECK(r.agree == 5);
  CHECK(r.left_out.empty());
}

TEST_CASE("a changed finding, reading or judgement differs, and the first is named") {
  Recorded store;
  SUBCASE("a finding") {
    store.database().run(
        "UPDATE finding SET value = value * 1.0000001 WHERE trial = 2 AND metric = (SELECT id FROM metric "
        "WHERE name = 'load_delta' AND variant = '1 nF at 0 V')");
    CHECK(store.again().first_difference.starts_with("TB3-0180, trial 1: under-load: load_delta (1 nF at 0 V) is "));
  }
  SUBCASE("a verdict") {
    store.database().run("UPDATE finding SET verdict = 0 WHERE trial = 2 AND verdict = 1");
  }
  SUBCASE("the judgement") {
    store.database().run("UPDATE trial SET judgement = 0 WHERE id = 2");
    CHECK(store.again().first_difference == "TB3-0180, trial 1: GO in the store, NO-GO worked out again");
  }
  SUBCASE("a VOID made GO") {
    store.database().run("UPDATE trial SET judgement = 0 WHERE id = 4");
  }
  SUBCASE("the readings") {
    store.database().run("UPDATE reading_blob SET body = substr(body, 1, length(body) - 1) WHERE trial = 2");
  }
  SUBCASE("the limits' text") {
    store.database().run("UPDATE document SET body = replace(body, '0.3 mV', '9 mV') WHERE kind = 'limits'");
  }
  REQUIRE_FALSE(store.database().failed());
  CHECK(store.again().differ >= 1);
}

TEST_CASE("what can't be worked out again is counted with its reason, and is no difference") {
  Recorded store;
  store.database().run("DELETE FROM reading_blob WHERE trial = 1");
  store.database().run("UPDATE reading_blob SET format = 99 WHERE trial = 2");
  const Recomputed r = store.again();
  CHECK(r.differ == 0);
  CHECK(r.agree == 3);
  CHECK(r.left_out.size() == 2);
  CHECK(r.left_out.at("raw readings are not there any more") == 1);
}

TEST_CASE("trials whose raw readings were archived are counted as not worked out again, and are no difference") {
  Recorded store;
  UuidMaker uuids;
  const std::string file = store.file("old.records");
  const auto archived = archive_readings(store.database(), uuids, file, std::numeric_limits<std::int64_t>::max(),
                                         "bench 1", "", 1'796'137'329'000'000);
  REQUIRE(archived.ok());
  CHECK(archived.value().trials == 5);
  const Recomputed r = store.again();
  CHECK(r.differ == 0);
  CHECK(r.agree == 0);
  CHECK(r.left_out.at("raw readings are not there any more") == 5);
}

TEST_CASE("another version of a step's arithmetic is not taken for a difference") {
  Recorded store;
  store.database().run("UPDATE reduction_step SET version = version + 1 WHERE kind = 'offset'");
  const Recomputed r = store.again();
  CHECK(r.differ == 0);
  CHECK(r.left_out.at("another version of a step's arithmetic") == 5);
}
