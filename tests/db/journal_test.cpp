#include "db/journal.hpp"

#include <sqlite3.h>
#include <sys/wait.h>
#include <unistd.h>

#include <algorithm>
#include <filesystem>
#include <fstream>

#include "db/audit.hpp"
#include "db/digest.hpp"
#include "db/sqlite.hpp"
#include "tests/db/room.hpp"

using namespace jigwright;
using room::must;

namespace {

std::shared_ptr<const SourceText> csv(const std::string& name, const std::string& text) {
  auto out = std::make_shared<SourceText>();
  out->name = name;
  out->text = text;
  return out;
}

void enter_small(Store& store, const EnteredBy& by = {}) {
  Faults faults;
  must(store.enter(
      {csv("boards.csv", "order,build_no,serial,panel,product\nWO-1,1,TB-01,P-1,amp\nWO-1,2,TB-02,P-1,amp\n"),
       csv("reels.csv",
           "reel,maker,part,lot,date_code,distributor,marking,rereeled,quantity\n"
           "R-1,Alder,OA,L1,,,,no,100\n")},
      room::noon_us, faults, by));
  REQUIRE(!faults.any());
}

}  // namespace

TEST_CASE("a record's hash is SHA-256 of the fields as docs/store.md lays them out") {
  const JournalRow row{1, 2, 1, std::string(16, '\x11'), 3, std::string(32, '\x22')};
  const auto eight = [](char low) { return std::string(1, low) + std::string(7, '\0'); };
  const std::string laid_out = eight(32) + std::string(32, '\0') + eight(16) + std::string(16, '\x33') + eight(1) +
                               eight(2) + eight(1) + eight(16) + row.uuid + eight(3) + eight(32) + row.body_sha256;
  CHECK(record_hash(chain_start(), std::string(16, '\x33'), row) == sha256(laid_out));
}

TEST_CASE("a trial leaves a record at its end, and a list one for each file that brought something") {
  const auto store = room::memory();
  room::try_board(*store, "TB-01", Judgement::no_go);
  enter_small(*store, {"office", "B. Clerk"});
  enter_small(*store, {"office", "B. Clerk"});  // brings nothing new
  const auto log = must(read_log(store->database(), "", 100));
  REQUIRE(log.size() == 3);
  const auto trial = std::find_if(log.begin(), log.end(), [](const LogLine& l) { return l.what == "trial: NO-GO"; });
  REQUIRE(trial != log.end());
  CHECK(trial->on == "TB-01");
  CHECK(trial->who == "A. Tester");
  CHECK(trial->at_us == room::noon_us + 2'200'000);
  CHECK(trial->seq == 1);
  CHECK(std::count_if(log.begin(), log.end(),
                      [](const LogLine& l) { return l.station == "office" && l.who == "B. Clerk"; }) == 2);
}

TEST_CASE("the log of a serial has its trials and the list that placed it; the last so many are the newest") {
  const auto store = room::memory();
  enter_small(*store);
  room::try_board(*store, "TB-01", Judgement::go, room::noon_us + 10'000'000);
  room::try_board(*store, "TB-02", Judgement::go, room::noon_us + 20'000'000);
  const auto log = must(read_log(store->database(), "TB-02", 100));
  REQUIRE(log.size() == 2);
  CHECK(log[0].what == "boards entered");
  CHECK(log[0].on == "boards.csv");
  CHECK(log[1].what == "trial: GO");
  const auto last = must(read_log(store->database(), "", 2));
  REQUIRE(last.size() == 2);
  CHECK(last[0].on == "TB-01");
  CHECK(last[1].on == "TB-02");
  const auto unknown = read_log(store->database(), "TB-03", 2);
  REQUIRE(!unknown);
  CHECK(unknown.error().kind == Error::Kind::usage);
}

TEST_CASE("a clock that steps back changes neither the order nor the stamps, and the audit counts it") {
  const auto store = room::memory();
  room::try_board(*store, "TB-01", Judgement::go, room::noon_us);
  room::try_board(*store, "TB-02", Judgement::go, room::noon_us - 3'600'000'000);
  const auto log = must(read_log(store->database(), "", 100));
  REQUIRE(log.size() == 2);
  CHECK(log[1].on == "TB-02");
  CHECK(log[1].at_us == room::noon_us - 3'600'000'000 + 2'200'000);
  const auto report = must(audit(store->database()));
  CHECK(report.whole());
  CHECK(report.steps_back == 1);
}

TEST_CASE("two stations that write in turn and at once, from two processes, make a chain each") {
  room::TempFolder folder;
  const std::string path = folder.file("s.db");
  room::open(path);
  const pid_t child = fork();
  REQUIRE(child >= 0);
  if (child == 0) {  // no test macros here: it leaves by _exit
    auto store = Store::open(path);
    bool sound = store.ok();
    for (int i = 0; sound && i < 20; ++i) {
      TrialStart start = room::start("CHILD-" + std::to_string(i));
      start.station = "bench 2";
      const auto begun = store.value()->begin_trial(start);
      sound = begun.ok() && store.value()->finish_trial(begun.value(), room::end(Judgement::go)).ok();
    }
    _exit(sound ? 0 : 1);
  }
  const auto store = room::open(path);
  for (int i = 0; i < 20; ++i) room::try_board(*store, "PARENT-" + std::to_string(i), Judgement::go);
  int status = 0;
  REQUIRE(waitpid(child, &status, 0) == child);
  CHECK(status == 0);
  const auto report = must(audit(store->database()));
  CHECK(report.whole());
  REQUIRE(report.heads.size() == 2);
  CHECK(report.heads[0].seq == 20);
  CHECK(report.heads[1].seq == 20);
  CHECK(report.trials == 40);
}

namespace {

/// A store of an older layout, from its dump.
void old_store(const std::string& path, int layout = 1) {
  std::ifstream in(TEST_DATA "/store_layout_" + std::to_string(layout) + ".sql");
  const std::string dump{std::istreambuf_iterator<char>(in), {}};
  sqlite3* handle = nullptr;
  REQUIRE(sqlite3_open(path.c_str(), &handle) == SQLITE_OK);
  CHECK(sqlite3_exec(handle, "PRAGMA journal_mode = WAL", nullptr, nullptr, nullptr) == SQLITE_OK);
  CHECK(sqlite3_exec(handle, dump.c_str(), nullptr, nullptr, nullptr) == SQLITE_OK);
  sqlite3_close(handle);
}

}  // namespace

TEST_CASE("a store of layout 1 is copied, then brought up to date: every trial and list gets its records") {
  room::TempFolder folder;
  const std::string path = folder.file("s.db");
  old_store(path);
  StoreOptions reading;
  reading.access = StoreOptions::Access::read;
  const auto store = room::open(path, reading);
  CHECK(store->notice() ==
        path + " was brought from layout 1 to layout 3; as it was, it lies in " + path + ".layout-1");
  const auto report = must(audit(store->database()));
  for (const Difference& d : report.differences) FAIL_CHECK(d.what);
  CHECK(report.records == 6);  // 5 trials, 1 for the lists
  CHECK(must(store->show("TB-01")).trials.size() == 2);
  CHECK(must(store->trace_reel("R-1")).boards.size() == 2);
  CHECK(room::open(path)->notice().empty());
}

TEST_CASE("the chains of a store of layout 2 go on in a new epoch, which names where they ended") {
  room::TempFolder folder;
  const std::string path = folder.file("s.db");
  old_store(path, 2);
  const auto store = room::open(path);
  CHECK(store->notice().ends_with(".layout-2"));
  const auto report = must(audit(store->database()));
  for (const Difference& d : report.differences) FAIL_CHECK(d.what);
  CHECK(report.records == 9);  // two epochs begun, 5 trials, 2 lists
  REQUIRE(report.heads.size() == 2);
  CHECK(report.heads[0].epoch == 2);
  const auto copy = must(Database::open(path + ".layout-2", Database::Access::read, false, 0));
  Query before = copy->query("SELECT hash FROM journal WHERE station = 2 AND epoch = 1 AND seq = 9");
  REQUIRE(before.next());
  Query named = store->database().query(
      "SELECT e.last_seq, e.last_hash FROM epoch_begun e JOIN journal j ON j.uuid = e.uuid WHERE j.station = 2");
  REQUIRE(named.next());
  CHECK(named.integer(0) == 9);
  CHECK(named.text(1) == before.text(0));
  CHECK(must(store->show("TB-03")).trials.at(0).void_reason == "the program ended in mid-trial");
}

TEST_CASE("a trial that was cut short gets its record when its station is driven again, and keeps its place") {
  room::TempFolder folder;
  const std::string path = folder.file("s.db");
  must(room::open(path)->begin_trial(room::start("TB-01")));  // its program ends here
  CHECK(must(audit(room::open(path)->database())).open == 1);
  const auto store = room::open(path);
  room::try_board(*store, "TB-02", Judgement::go, room::noon_us + 60'000'000);
  const auto log = must(read_log(store->database(), "", 10));
  REQUIRE(log.size() == 2);
  CHECK(log[0].on == "TB-01");
  CHECK(log[0].what == "trial: VOID");
  CHECK(log[0].at_us == room::noon_us + 60'000'000);  // when it was found
  const auto report = must(audit(store->database()));
  CHECK(report.whole());
  CHECK(report.open == 0);
}

TEST_CASE("a station is driven by one program at a time; another station of the same store is not in its way") {
  room::TempFolder folder;
  const std::string path = folder.file("s.db");
  auto first = room::open(path);
  const auto second = room::open(path);
  room::try_board(*first, "TB-01", Judgement::go);
  const auto refused = second->begin_trial(room::start("TB-02"));
  REQUIRE(!refused);
  CHECK(refused.error().what == "another program drives station bench 1 now");
  TrialStart other = room::start("TB-02");
  other.station = "bench 2";
  must(second->begin_trial(other));
  first.reset();
  room::try_board(*second, "TB-03", Judgement::go);
}

TEST_CASE("a store whose newest records are not as recorded takes no further trial") {
  room::TempFolder folder;
  const std::string path = folder.file("s.db");
  room::try_board(*room::open(path), "TB-01", Judgement::go);
  must(Database::open(path, Database::Access::write, false, 0))->run("UPDATE finding SET value = 0 WHERE metric = 1");
  const auto refused = room::open(path)->begin_trial(room::start("TB-02"));
  REQUIRE(!refused);
  CHECK(
      refused.error().what ==
      "the store is damaged: trial of TB-01 (station bench 1, epoch 1, record 1): the rows are not what was recorded");
  CHECK(refused.error().to_do.find("jigwright restore") != std::string::npos);
}

TEST_CASE("the copy before a new layout is the old store, and a copy that is there already stays") {
  room::TempFolder folder;
  const std::string path = folder.file("s.db");
  old_store(path);
  std::ofstream(path + ".layout-1") << "mine";
  CHECK(room::open(path)->notice().ends_with("s.db.layout-1.2"));
  CHECK(std::filesystem::file_size(path + ".layout-1") == 4);
  const auto copy = must(Database::open(path + ".layout-1.2", Database::Access::read, false, 0));
  CHECK(copy->first("PRAGMA user_version") == 1);
  CHECK(copy->first("SELECT count(*) FROM trial") == 5);
  CHECK(copy->first("SELECT count(*) FROM sqlite_schema WHERE name = 'journal'") == 0);
}

TEST_CASE("where no copy can be made, the old store stays as it is") {
  room::TempFolder folder;
  const std::string path = folder.file("s.db");
  old_store(path);
  std::string taken = path + ".layout-1";
  std::filesystem::create_symlink("nowhere/at-all", taken);  // no file, and none can be made
  const auto refused = Store::open(path);
  REQUIRE(!refused);
  CHECK(refused.error().kind == Error::Kind::store);
  CHECK(refused.error().to_do == "make room beside the store; nothing was changed");
  std::filesystem::remove(taken);
  CHECK(room::open(path)->notice().ends_with("s.db.layout-1"));
}

TEST_CASE("two stations in one store have a chain each") {
  const auto store = room::memory();
  TrialStart other = room::start("TB-02");
  other.station = "bench 2";
  room::try_board(*store, "TB-01", Judgement::go);
  must(store->begin_trial(other));
  const auto report = must(audit(store->database()));
  CHECK(report.whole());
  REQUIRE(report.heads.size() == 1);  // the other's trial is under way
  CHECK(report.heads[0].seq == 1);
  CHECK(report.open == 1);
}
