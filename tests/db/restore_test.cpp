// A store that was damaged, made again from a backup and the copies of records since.
#include "db/act.hpp"
#include "db/backup.hpp"
#include "db/digest.hpp"
#include "db/readings_archive.hpp"
#include "tests/db/disks.hpp"
#include "tests/db/line.hpp"

using namespace jigwright;
using room::Line;
using room::must;
namespace fs = std::filesystem;

namespace {

std::int64_t count(const std::string& path, Sql sql) {
  const auto db = must(Database::open(path, Database::Access::read, false, 0));
  const auto out = db->first(sql);
  REQUIRE(out.has_value());
  return *out;
}

/// A file of copies with some records changed or left out, each frame sound in itself.
template <class Change>
void rewrite(const std::string& file, Change change) {
  const std::string bytes = room::bytes_of(file);
  const auto head = head_length(bytes, "");
  REQUIRE(head.has_value());
  CopySet all;
  REQUIRE(read_frames(std::string_view(bytes).substr(*head), all) == bytes.size() - *head);
  std::string kept = bytes.substr(0, *head);
  for (const auto& [hash, document] : all.documents) kept += document_frame(document);
  for (const auto& [hash, part] : all.parts) kept += part_frame(part);
  for (const auto& [uuid, chain] : all.chains)
    for (const auto& [at, record] : chain) {
      RecordCopy changed = record;
      if (change(changed)) kept += record_frame(changed);
    }
  room::write_bytes(file, kept);
}

std::string copies(const Line& line, int number = 1) {
  return line.backups + "/" + copies_of("00000" + std::to_string(number) + "-");
}

/// A backup of one trial, and `more` trials copied since.
void back_up_and_try(Line& line, int more) {
  const auto store = line.store();
  line.try_one(*store, 0);
  line.backup();
  for (int i = 1; i <= more; ++i) line.try_one(*store, i);
  line.copy(*store);
}

/// Everything that a line does: lists, two stations, trials of every judgement, tried again, cut short, acts.
void work(Line& line, int first, int boards) {
  auto store = line.store();
  Faults faults;
  if (first % 200 == 0) {
    must(store->enter(line.factory.lists(first), line.now_us, faults, {"bench 1", "C. Clerk"}));
    REQUIRE(!faults.any());
  }
  for (int i = first; i < first + boards; ++i) {
    const int station = 1 + i % 3 / 2;
    const Judgement judgement = i % 7 == 0 ? Judgement::no_go : i % 11 == 0 ? Judgement::void_ : Judgement::go;
    line.try_one(*store, i, judgement, station);
    if (i % 7 == 0) line.try_one(*store, i, Judgement::void_, 3 - station);
    if (i % 14 == 0) line.try_one(*store, i, Judgement::go, station);
    if (i % 50 == 3) {
      line.begin(*store, 90'000 + i, station);
      store.reset();  // killed
      store = line.store();
    }
  }
  ActRecord hold;
  hold.kind = "hold";
  hold.at_us = line.now_us += 1'000'000;
  hold.station = "bench 2";
  hold.who = "B. Engineer";
  hold.reason = "a doubtful reel";
  hold.boards = {line.factory.serial(first), line.factory.serial(first + 1)};
  hold.values = {{"until", "a release"}, {"depth", "full"}};
  must(write_act(store->database(), store->uuids(), hold));
}

}  // namespace

TEST_CASE("a log that was left beside a store put aside by hand does not get into the restored one") {
  Line line;
  {
    const auto store = line.store();
    for (int i = 0; i < 20; ++i) line.try_one(*store, i);
    line.backup();
    for (int i = 20; i < 40; ++i) line.try_one(*store, i);
    line.copy(*store);
    for (int i = 40; i < 60; ++i) line.try_one(*store, i);
    fs::copy_file(line.path + "-wal", line.folder.file("left-wal"));
  }
  fs::rename(line.path, line.folder.file("aside.db"));
  fs::rename(line.folder.file("left-wal"), line.path + "-wal");
  const Restored r = line.restored();
  room::check_whole(line.path);
  REQUIRE(r.heads.size() == 1);
  CHECK(room::audit_of(line.path).heads.at(0).hash == r.heads[0].hash);
  CHECK(count(line.path, "SELECT count(*) FROM trial") == 40);
}

TEST_CASE("a board tried on two stations, whose first trial was cut short and recorded last, keeps its order") {
  Line line;
  auto first = line.store();
  line.try_one(*first, 1);
  line.backup();
  line.begin(*first, 50);
  first.reset();  // its program ends in mid-trial
  {
    const auto second = line.store();
    line.try_one(*second, 50, Judgement::go, 2);
    line.copy(*second);
  }
  first = line.store();
  line.try_one(*first, 2);
  line.copy(*first);
  first.reset();
  const auto before = room::content(line.path);
  room::ruin(line.path);
  const Restored r = line.restored();
  CHECK(r.gaps.empty());
  room::check_whole(line.path);
  room::check_same(before, room::content(line.path));
}

TEST_CASE("a board whose first trial is lost with one station's copies keeps its second, on the other") {
  Line line;
  {
    const auto store = line.store();
    line.try_one(*store, 1, Judgement::go, 1);
    line.backup();
    line.try_one(*store, 50, Judgement::no_go, 1);
    line.try_one(*store, 50, Judgement::go, 2);
    line.copy(*store);
  }
  rewrite(copies(line), [](RecordCopy& r) { return r.station == "bench 2"; });
  room::ruin(line.path);
  line.restored();
  room::check_whole(line.path);
  CHECK(count(line.path, "SELECT count(*) FROM boards WHERE serial = 'FX-0000051' AND judgement = 'GO'") == 1);
  const auto store = line.store();
  line.try_one(*store, 50, Judgement::go, 1);
  room::check_whole(line.path);
}

TEST_CASE("what was recorded after a restore that lost something is restored again from the same backup") {
  Line line;
  back_up_and_try(line, 6);
  const std::string bytes = room::bytes_of(copies(line));
  room::flip(copies(line), bytes.rfind("FX-0000004"));
  room::ruin(line.path);
  const Restored first = line.restored();
  CHECK(first.added == 2);
  REQUIRE(first.gaps.size() == 2);
  CHECK(first.gaps[0].starts_with("000001.records is damaged: "));
  CHECK(first.gaps[1] == "station bench 1: record 4 of epoch 1 is missing from the copies");
  {
    const auto store = line.store();
    for (int i = 3; i < 25; ++i) line.try_one(*store, i);
    line.copy(*store);
  }
  const auto before = room::content(line.path);
  room::ruin(line.path);
  SUBCASE("with the copies as they were") {}
  SUBCASE("with the lost record found again") {
    // The file as it was, and behind it what the new epoch added.
    const std::string now = room::bytes_of(copies(line));
    room::write_bytes(copies(line), bytes + now.substr(bytes.size()));
  }
  line.restored();
  room::check_whole(line.path);
  room::check_same(before, room::content(line.path));
}

TEST_CASE("a record that is not sound does not harm the other station's") {
  Line line;
  {
    const auto store = line.store();
    line.try_one(*store, 1, Judgement::go, 1);
    line.try_one(*store, 2, Judgement::go, 2);
    line.backup();
  }
  {
    const auto store = line.store();
    TrialStart start = line.start(3, 1);
    const OpenTrial open = must(store->begin_trial(start));
    TrialEnd end = line.factory.end(3);
    end.outcome = {};
    end.outcome.judgement = Judgement::go;
    for (FindingRow& row : end.findings) {
      row.judged.verdict = Verdict::met;
      row.metric.name.variant += " in a new plan";
    }
    end.at_us = line.now_us += 1'000'000;
    must(store->finish_trial(open, end));
    start = line.start(4, 2);
    const OpenTrial next = must(store->begin_trial(start));
    for (FindingRow& row : end.findings) row.metric.name.variant += ", another";
    end.at_us = line.now_us += 1'000'000;
    must(store->finish_trial(next, end));
    line.copy(*store);
  }
  rewrite(copies(line), [](RecordCopy& r) {
    if (r.station == "bench 1") r.readings += "changed";
    return true;
  });
  room::ruin(line.path);
  const Restored r = line.restored();
  CHECK(r.added == 1);
  REQUIRE(r.gaps.size() == 1);
  CHECK(r.gaps[0].find("bench 1") != std::string::npos);
  room::check_whole(line.path);
}

TEST_CASE("a store is not restored while a station drives it that began after the backup") {
  Line line;
  line.try_one(*line.store(), 1);
  line.backup();
  const auto store = line.store();
  line.try_one(*store, 2, Judgement::go, 2);
  const auto refused = line.restore();
  REQUIRE(!refused);
  CHECK(refused.error().what == "a program drives a station of this store now");
}

TEST_CASE("a restored store holds every row of the one that was damaged, and goes on") {
  Line line;
  work(line, 0, 120);
  auto open = line.store();
  const OpenTrial under_way = line.begin(*open, 50'000);
  line.backup();
  line.finish(*open, under_way, 50'000);
  open.reset();
  work(line, 120, 80);
  work(line, 200, 60);
  {
    const auto store = line.store();
    line.copy(*store);
  }
  const auto before = room::content(line.path);
  line.begin(*line.store(), 60'000, 2);  // under way when the disk fails: no record of it yet
  room::ruin(line.path);
  const Restored first = line.restored();
  CHECK(first.gaps.empty());
  CHECK(first.added > 150);
  REQUIRE(first.heads.size() == 2);
  for (const ChainHead& head : first.heads) {
    CHECK(head.epoch == 2);
    CHECK(head.seq == 1);
  }
  CHECK(fs::exists(first.set_aside));
  room::check_whole(line.path);
  room::check_same(before, room::content(line.path));

  work(line, 400, 40);
  line.backup();
  work(line, 440, 30);
  line.copy(*line.store());
  const auto later = room::content(line.path);
  fs::remove(line.path);
  const Restored second = line.restored();
  CHECK(second.backup.starts_with("000002-"));
  CHECK(second.set_aside.empty());
  CHECK(!second.lost);
  CHECK(second.heads.at(0).epoch == 3);
  room::check_whole(line.path);
  room::check_same(later, room::content(line.path));
}

TEST_CASE("a restore can be repeated, from the same backup and copies") {
  Line line;
  back_up_and_try(line, 10);
  for (int i = 0; i < 4; ++i) {
    const auto before = room::content(line.path);
    room::ruin(line.path);
    const Restored r = line.restored();
    CHECK(r.gaps.empty());
    CHECK(r.heads.at(0).epoch == 2 + i);
    room::check_whole(line.path);
    room::check_same(before, room::content(line.path));
    const auto store = line.store();
    line.try_one(*store, 100 + i);
    line.copy(*store);
  }
}

TEST_CASE("what the copies lack is counted, where the damaged store can still tell") {
  Line line;
  back_up_and_try(line, 5);
  {
    const auto store = line.store();
    for (int i = 20; i < 27; ++i) line.try_one(*store, i);
    line.try_one(*store, 30, Judgement::go, 2);
    store->database().run("UPDATE finding SET value = 0 WHERE trial = 3 AND metric = 1");
  }
  const Restored r = line.restored();
  CHECK(r.lost == 8);
  room::check_whole(line.path);
}

TEST_CASE("a file of copies that is gone is told, and what is before it stands") {
  Line line;
  back_up_and_try(line, 5);
  const std::string second = line.backup();
  {
    const auto store = line.store();
    for (int i = 10; i < 15; ++i) line.try_one(*store, i);
    line.copy(*store);
  }
  const std::string third = line.backup();
  {
    const auto store = line.store();
    for (int i = 20; i < 25; ++i) line.try_one(*store, i);
    line.copy(*store);
  }
  room::ruin(second);
  room::ruin(third);
  fs::remove(copies(line, 2));
  room::ruin(line.path);
  const Restored r = line.restored();
  CHECK(r.backup.starts_with("000001-"));
  CHECK(r.passed_over.size() == 2);
  CHECK(r.added == 5);
  CHECK(r.gaps == std::vector<std::string>{"station bench 1: record 7 of epoch 1 is missing from the copies"});
  CHECK(count(line.path, "SELECT count(*) FROM trial") == 6);
  room::check_whole(line.path);
}

TEST_CASE("where the newest backup is damaged, the one before and all later copies restore as much") {
  Line line;
  back_up_and_try(line, 5);
  const std::string second = line.backup();
  {
    const auto store = line.store();
    for (int i = 10; i < 15; ++i) line.try_one(*store, i);
    line.copy(*store);
  }
  const auto before = room::content(line.path);
  SUBCASE("its middle overwritten") {
    room::ruin(second);
  }
  SUBCASE("cut off") {
    fs::resize_file(second, fs::file_size(second) / 2);
  }
  SUBCASE("emptied") {
    fs::resize_file(second, 0);
  }
  SUBCASE("one value changed") {
    must(Database::open(second, Database::Access::write, false, 0))->run("UPDATE trial SET judgement = 0, nogo = 1");
  }
  room::ruin(line.path);
  const Restored r = line.restored();
  CHECK(r.backup.starts_with("000001-"));
  CHECK(r.passed_over.size() == 1);
  CHECK(r.gaps.empty());
  CHECK(r.added == 10);
  room::check_whole(line.path);
  room::check_same(before, room::content(line.path));
}

TEST_CASE("a record that was changed in the copies, its frame made good again, is told, and nothing of it stands") {
  Line line;
  back_up_and_try(line, 6);
  SUBCASE("its body") {
    rewrite(copies(line), [](RecordCopy& r) {
      if (r.seq == 4) r.body[40] = static_cast<char>(r.body[40] ^ 1);
      return true;
    });
  }
  SUBCASE("its stamp") {
    rewrite(copies(line), [](RecordCopy& r) {
      if (r.seq == 4) ++r.at_us;
      return true;
    });
  }
  SUBCASE("its hash, to fit the changed body") {
    rewrite(copies(line), [](RecordCopy& r) {
      if (r.seq != 4) return true;
      r.body[40] = static_cast<char>(r.body[40] ^ 1);
      r.hash = sha256(r.body);
      return true;
    });
  }
  room::ruin(line.path);
  const Restored r = line.restored();
  CHECK(r.added == 2);
  CHECK(r.gaps == std::vector<std::string>{"station bench 1: record 4 of epoch 1 is not sound"});
  CHECK(count(line.path, "SELECT count(*) FROM trial") == 3);
  CHECK(count(line.path, "SELECT count(*) FROM board WHERE serial > 'FX-0000003'") == 0);
  room::check_whole(line.path);
}

TEST_CASE("any byte of the copies changed: the restored store is whole, and has every record before it") {
  Line line;
  back_up_and_try(line, 4);
  const std::string good = room::bytes_of(copies(line));
  std::mt19937_64 random(5);
  room::ruin(line.path);
  for (int i = 0; i < 60; ++i) {
    std::string bytes = good;
    const std::size_t at = random() % bytes.size();
    CAPTURE(at);
    if (i % 3 == 0) bytes.resize(at);
    if (i % 3 != 0) bytes[at] = static_cast<char>(bytes[at] ^ (1 + random() % 255));
    room::write_bytes(copies(line), bytes);
    const Restored r = line.restored();
    CHECK(room::audit_of(line.path).whole());
    CHECK(r.added <= 4);
    const std::string whole = bytes.substr(0, at);
    CopySet before;
    if (const auto head = head_length(whole, "")) read_frames(std::string_view(whole).substr(*head), before);
    std::int64_t records = 0;
    for (const auto& [uuid, chain] : before.chains) records += static_cast<std::int64_t>(chain.size());
    CHECK(r.added >= records);
    if (r.added < 4) CHECK((!r.gaps.empty() || !r.foreign.empty() || r.lost.value_or(1) > 0));
  }
}

TEST_CASE("copies of another store are told and passed over") {
  Line line, other;
  back_up_and_try(line, 3);
  back_up_and_try(other, 3);
  fs::copy_file(copies(other), line.backups + "/000009.records");
  room::ruin(line.path);
  const Restored r = line.restored();
  CHECK(r.foreign == std::vector<std::string>{"000009.records"});
  CHECK(r.added == 3);
  room::check_whole(line.path);
}

TEST_CASE("a store is not replaced by another store's backup") {
  Line line, other;
  back_up_and_try(line, 3);
  back_up_and_try(other, 3);
  const auto before = room::content(line.path);
  const auto refused = restore(line.path, other.backups, "", line.now_us);
  REQUIRE(!refused);
  CHECK(refused.error().what == "the backups here are of another store than " + line.path);
  room::check_same(before, room::content(line.path));
}

TEST_CASE("where there is nothing to restore from, the file stays as it is") {
  Line line;
  line.try_one(*line.store(), 1);
  const std::string before = room::bytes_of(line.path);
  const auto none = line.restore();
  REQUIRE(!none);
  CHECK(none.error().what == "there is no backup here");
  room::ruin(line.backup());
  const auto damaged = line.restore();
  REQUIRE(!damaged);
  CHECK(damaged.error().what == "no backup here is whole");
  CHECK(room::bytes_of(line.path) == before);
  CHECK(!fs::exists(line.path + ".restoring"));
}

TEST_CASE("no board is tried while a store is restored, and a program that had it open writes no more into it") {
  Line line;
  back_up_and_try(line, 3);
  const auto early = line.store();  // opened, and has tried no board yet
  {
    const auto lock = StationLock::take_all(line.path);
    REQUIRE(lock);
    const auto refused = early->begin_trial(line.start(50));
    REQUIRE(!refused);
    CHECK(refused.error().what == "this store is being restored now");
    CHECK(!line.restore());
  }
  line.restored();
  const auto refused = early->begin_trial(line.start(50));
  REQUIRE(!refused);
  CHECK(refused.error().what == "the store's file was moved, replaced or removed while this program had it open");
  line.try_one(*line.store(), 50);
  room::check_whole(line.path);
}

TEST_CASE("a disk that fills up while a store is made again leaves what stood there") {
  Line line;
  back_up_and_try(line, 40);
  const std::string before = room::bytes_of(line.path);
  Result<Restored> r = Error{};
  for (const rlim_t limit : {20'000, static_cast<int>(fs::file_size(line.path)) + 4096}) {
    CAPTURE(limit);
    const std::string backup = line.backups + "/" + backups_in(line.backups).back();
    const room::FileLimit quota(std::min<rlim_t>(limit, fs::file_size(backup) + 20'000));
    r = line.restore();
    REQUIRE(!r);
    CHECK(r.error().kind == Error::Kind::store);
    CHECK(room::bytes_of(line.path) == before);
    CHECK(!fs::exists(line.path + ".restoring"));
  }
  CHECK(line.restored().gaps.empty());
}

TEST_CASE("copies that a second program caught up with restore as well") {
  Line line;
  {
    const auto first = line.store();
    line.try_one(*first, 0);
    line.backup();
    RecordCopies mine(first->database(), line.backups);
    const auto second = line.store();
    RecordCopies theirs(second->database(), line.backups);
    for (int i = 1; i < 30; ++i) {
      line.try_one(*first, i);
      if (i % 3 == 0) must(mine.catch_up());
      if (i % 4 == 0) must(theirs.catch_up());
      if (i == 15) line.backup();
      if (i % 7 == 0) line.try_one(*second, i, Judgement::go, 2);
    }
    CHECK(must(mine.catch_up()) + must(theirs.catch_up()) < 8);
    CHECK(must(mine.catch_up()) == 0);
  }
  const auto before = room::content(line.path);
  SUBCASE("from the newest backup") {}
  SUBCASE("from the one before") {
    room::ruin(line.backups + "/" + backups_in(line.backups).back());
  }
  room::ruin(line.path);
  const Restored r = line.restored();
  CHECK(r.gaps.empty());
  room::check_whole(line.path);
  room::check_same(before, room::content(line.path));
}

TEST_CASE("a clock that was set back between the two stations' trials of a board does not turn their order") {
  Line line;
  {
    const auto store = line.store();
    line.try_one(*store, 0);
    line.backup();
    line.try_one(*store, 5, Judgement::no_go, 1);
    line.now_us -= 3'600'000'000;
    line.try_one(*store, 5, Judgement::go, 2);
    line.try_one(*store, 5, Judgement::void_, 1);
    line.copy(*store);
  }
  const auto before = room::content(line.path);
  room::ruin(line.path);
  line.restored();
  room::check_whole(line.path);
  room::check_same(before, room::content(line.path));
}

TEST_CASE("a feed that one station entered waits for the reel that the other did, whatever the clock said") {
  Line line;
  const auto csv = [](const char* name, const char* text) {
    return std::make_shared<const SourceText>(SourceText{name, text});
  };
  {
    const auto store = line.store();
    line.try_one(*store, 0, Judgement::go, 1);
    line.try_one(*store, 0, Judgement::go, 2);
    line.backup();
    Faults faults;
    must(store->enter(
        {csv("boards.csv", "order,build_no,serial,panel,product\nWO-9,1,FX-0000001,,\n"),
         csv("reels.csv",
             "reel,maker,part,lot,date_code,distributor,rereeled,quantity,marking\nR-1,Alder,OA,L1,,,,,\n")},
        line.now_us, faults, {"bench 1", ""}));
    must(store->enter({csv("feeds.csv", "order,designator,reel,from,to\nWO-9,U7,R-1,1,1\n")}, line.now_us - 1'000'000,
                      faults, {"bench 2", ""}));
    if (faults.any()) FAIL(render(faults));
    line.copy(*store);
  }
  const auto before = room::content(line.path);
  room::ruin(line.path);
  CHECK(line.restored().gaps.empty());
  room::check_whole(line.path);
  room::check_same(before, room::content(line.path));
}

TEST_CASE("an older backup restores a store whose raw readings were archived since") {
  Line line;
  back_up_and_try(line, 6);
  {
    const auto store = line.store();
    line.now_us += 1'000'000;
    must(archive_readings(store->database(), store->uuids(), line.folder.file("old.records"), line.now_us, "bench 1",
                          "A. Tester", line.now_us));
    for (int i = 20; i < 24; ++i) line.try_one(*store, i);
    line.copy(*store);
  }
  const auto before = room::content(line.path);
  room::ruin(line.path);
  CHECK(line.restored().gaps.empty());
  room::check_whole(line.path);
  CHECK(room::audit_of(line.path).archived == 7);
  room::check_same(before, room::content(line.path));
}
