#include "db/backup.hpp"

#include <fcntl.h>
#include <sys/file.h>

#include <thread>

#include "tests/db/disks.hpp"
#include "tests/db/line.hpp"

using namespace jigwright;
using room::Line;
using room::must;
namespace fs = std::filesystem;

namespace {

std::vector<std::string> names_in(const std::string& folder) {
  std::vector<std::string> out;
  for (const auto& entry : fs::directory_iterator(folder)) out.push_back(entry.path().filename().string());
  std::sort(out.begin(), out.end());
  return out;
}

std::int64_t trials_in(const std::string& path) {
  return must(Database::open(path, Database::Access::read, false, 0))
      ->first("SELECT count(*) FROM trial WHERE state = 1")
      .value_or(-1);
}

}  // namespace

TEST_CASE("a backup is the store as it was, whole and a file of its own, in a folder that it makes") {
  Line line;
  const auto store = line.store();
  must(line.factory.enter_all(*store));
  for (int i = 0; i < 5; ++i) line.try_one(*store, i);
  const auto before = room::content(line.path);
  BackupPlan plan{line.folder.file("disk/of/backups"), 3600, 7};
  const BackupMade made = must(make_backup(line.path, plan, 1'796'137'329'000'000, nullptr));
  CHECK(made.path == plan.folder + "/000001-2026-12-01T150209Z.db");
  CHECK(made.audit.trials == 5);
  CHECK(made.bytes == static_cast<std::int64_t>(fs::file_size(made.path)));
  CHECK(names_in(plan.folder) == std::vector<std::string>{"000001-2026-12-01T150209Z.db"});
  room::check_same(before, room::content(made.path));
}

TEST_CASE("a backup of a store that a line works on is whole, and has all that was durable when it began") {
  Line line;
  line.factory = room::Factory({7, 100'000, 200, 12, 60'000});
  const auto store = line.store();
  for (int i = 0; i < 150; ++i) line.try_one(*store, i);  // several steps of pages
  std::atomic<bool> ended{false};
  Result<BackupMade> made = Error{};
  std::thread other([&] {
    made = make_backup(line.path, line.plan(), line.now_us);
    ended = true;
  });
  int tried = 150;
  while (!ended) line.try_one(*store, tried++);
  other.join();
  const BackupMade backup = must(made);
  CHECK(tried > 151);
  const std::int64_t held = trials_in(backup.path);
  CHECK(held >= 150);
  CHECK(held <= tried);
  room::check_whole(backup.path);
  room::check_whole(line.path);
}

TEST_CASE("only so many backups are kept, and the copies that they need") {
  Line line;
  const auto store = line.store();
  BackupPlan plan = line.plan();
  plan.keep = 2;
  for (int i = 0; i < 5; ++i) {
    line.try_one(*store, i);
    must(make_backup(line.path, plan, line.now_us += 1'000'000));
    line.try_one(*store, 10 + i);
    line.copy(*store);
  }
  const auto all = backups_in(line.backups);
  REQUIRE(all.size() == 2);
  CHECK(all[0].starts_with("000004-"));
  CHECK(all[1].starts_with("000005-"));
  CHECK(copies_since(line.backups, all[0]) ==
        std::vector<std::string>{"000003.records", "000004.records", "000005.records"});
  CHECK(!fs::exists(line.backups + "/000002.records"));
}

TEST_CASE("backups are ordered by number, also where the clock went back") {
  Line line;
  line.try_one(*line.store(), 1);
  must(make_backup(line.path, line.plan(), line.now_us));
  must(make_backup(line.path, line.plan(), line.now_us - 3'600'000'000));
  const auto all = backups_in(line.backups);
  REQUIRE(all.size() == 2);
  CHECK(all[1].starts_with("000002-"));
  CHECK(backup_time_us(all[1]) < backup_time_us(all[0]));
}

TEST_CASE("a disk that has no room for the backup is named with figures, before anything is written") {
  room::SmallDisk disk("size=1m");
  if (!disk.mounted()) return;
  Line line;
  line.try_one(*line.store(), 1);
  const auto made = make_backup(line.path, {disk.file("backups"), 3600, 7}, line.now_us);
  REQUIRE(!made);
  CHECK(made.error().what.starts_with("no backup was made: it takes 0."));
  CHECK(made.error().what.ends_with("MB are left on its disk"));
  CHECK(names_in(disk.file("backups")).empty());
}

TEST_CASE("a quota that strikes in the middle of a backup leaves nothing behind") {
  Line line;
  {
    const auto store = line.store();
    for (int i = 0; i < 20; ++i) line.try_one(*store, i);
  }
  Result<BackupMade> made = Error{};
  {
    const room::FileLimit limit(60'000);
    made = make_backup(line.path, line.plan(), line.now_us);
  }
  REQUIRE(!made);
  CHECK(made.error().what.starts_with("no backup was made: "));
  CHECK(names_in(line.backups).empty());
  CHECK(!line.backup().empty());
}

TEST_CASE("what a backup left whose program was killed goes with the next one") {
  Line line;
  line.try_one(*line.store(), 1);
  fs::create_directories(line.backups);
  room::write_bytes(line.backups + "/000001-2026-12-01T150209Z.db.part", "half");
  room::write_bytes(line.backups + "/000001-2026-12-01T150209Z.db.part-journal", "half");
  const std::string made = line.backup();
  CHECK(names_in(line.backups) == std::vector<std::string>{fs::path(made).filename().string()});
}

TEST_CASE("a backup that is told to stop leaves nothing behind") {
  Line line;
  line.try_one(*line.store(), 1);
  const std::atomic<bool> stop{true};
  const auto made = make_backup(line.path, line.plan(), line.now_us, &stop);
  REQUIRE(!made);
  CHECK(made.error().what == "no backup was made: it was stopped");
  CHECK(names_in(line.backups).empty());
}

TEST_CASE("of a damaged store there is no backup, but a report") {
  Line line;
  {
    const auto store = line.store();
    for (int i = 0; i < 5; ++i) line.try_one(*store, i);
    store->database().run("UPDATE finding SET value = 0 WHERE trial = 3 AND metric = 1");
  }
  const BackupMade made = must(make_backup(line.path, line.plan(), line.now_us));
  CHECK(made.path.empty());
  REQUIRE(!made.audit.whole());
  CHECK(sentence(made.audit.differences.front()) ==
        "trial of FX-0000003 (station bench 1, epoch 1, record 3): the rows are not what was recorded");
  CHECK(names_in(line.backups).empty());
}

TEST_CASE("a store whose pages are damaged is reported, whatever of it can still be read") {
  Line line;
  {
    const auto store = line.store();
    for (int i = 0; i < 200; ++i) line.try_one(*store, i);
  }
  SUBCASE("in the middle") {
    room::ruin(line.path);
  }
  SUBCASE("its schema") {
    std::string bytes = room::bytes_of(line.path);
    for (std::size_t at = 100; at < 4096; ++at) bytes[at] = 'x';
    room::write_bytes(line.path, bytes);
  }
  const BackupMade made = must(make_backup(line.path, line.plan(), line.now_us));
  CHECK(made.path.empty());
  CHECK(!made.audit.whole());
  CHECK(names_in(line.backups).empty());
}

TEST_CASE("one program at a time makes a backup in a folder") {
  Line line;
  line.try_one(*line.store(), 1);
  fs::create_directories(line.backups);
  const int folder = ::open(line.backups.c_str(), O_RDONLY | O_DIRECTORY);
  REQUIRE(::flock(folder, LOCK_EX | LOCK_NB) == 0);
  const auto made = make_backup(line.path, line.plan(), line.now_us);
  ::close(folder);
  REQUIRE(!made);
  CHECK(made.error().what == "no backup was made: another program is making one there now");
  CHECK(!line.backup().empty());
}

TEST_CASE("a folder that can't be made or written is named with its reason") {
  Line line;
  line.try_one(*line.store(), 1);
  room::write_bytes(line.folder.file("file"), "no folder");
  const auto made = make_backup(line.path, {line.folder.file("file/backups"), 3600, 7}, line.now_us);
  REQUIRE(!made);
  CHECK(made.error().what == "no backup was made: Not a directory");
  CHECK(made.error().where == line.folder.file("file/backups"));
}

TEST_CASE("a folder with another store's backups is refused") {
  Line line, other;
  line.try_one(*line.store(), 1);
  other.try_one(*other.store(), 1);
  line.backup();
  const auto made = make_backup(other.path, line.plan(), line.now_us + 1);
  REQUIRE(!made);
  CHECK(made.error().what ==
        "no backup was made: the backups there are of another store; give each store a folder of its own");
  CHECK(backups_in(line.backups).size() == 1);
}

TEST_CASE("a backup is due when there is none, the newest is old enough, or from the future") {
  Line line;
  line.try_one(*line.store(), 1);
  const BackupPlan plan = line.plan();
  CHECK(backup_due(plan, line.now_us));
  CHECK(!backup_due({}, line.now_us));
  const std::int64_t at_us = 1'796'137'329'000'000;
  must(make_backup(line.path, plan, at_us));
  const std::int64_t day_us = 24 * 3600 * std::int64_t{1'000'000};
  CHECK(!backup_due(plan, at_us));
  CHECK(!backup_due(plan, at_us + day_us - 1));
  CHECK(backup_due(plan, at_us + day_us));
  CHECK(!backup_due(plan, at_us - 1'000'000));
  CHECK(backup_due(plan, at_us - 1'000'001));  // the clock was wrong then, or is now
  must(make_backup(line.path, plan, at_us - day_us));
  CHECK(!backup_due(plan, at_us - day_us));
}
