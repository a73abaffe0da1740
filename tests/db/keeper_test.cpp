#include "db/keeper.hpp"

#include "tests/db/disks.hpp"
#include "tests/db/line.hpp"

using namespace jigwright;
using room::Line;
using room::must;
namespace fs = std::filesystem;

namespace {

StoreOptions with_backups(const Line& line) {
  StoreOptions out;
  out.backups = line.plan();
  return out;
}

std::size_t copied(const Line& line) {
  const std::string bytes = room::bytes_of(line.backups + "/000001.records");
  CopySet set;
  if (const auto head = head_length(bytes, "")) read_frames(std::string_view(bytes).substr(*head), set);
  return set.chains.empty() ? 0 : set.chains.begin()->second.size();
}

}  // namespace

TEST_CASE("while boards are tried, a backup is made when it is due, and each record copied") {
  Line line;
  const auto store = room::open(line.path, with_backups(line));
  line.try_one(*store, 0);
  store->upkeep();
  store->finish_upkeep();
  REQUIRE(backups_in(line.backups).size() == 1);
  room::check_whole(line.backups + "/" + backups_in(line.backups)[0]);
  for (int i = 1; i < 4; ++i) {
    line.try_one(*store, i);
    store->upkeep();
    CHECK(copied(line) == static_cast<std::size_t>(i));
  }
  store->finish_upkeep();
  CHECK(backups_in(line.backups).size() == 1);
  CHECK(store->take_news().empty());
}

TEST_CASE("a folder that goes away gives one sentence, the trials go on, and the copies catch up later") {
  Line line;
  line.try_one(*line.store(), 0);
  const auto store = room::open(line.path, with_backups(line));
  Keeper keeper(store->database(), line.plan());
  line.now_us = room::noon_us;
  must(make_backup(line.path, line.plan(), line.now_us));
  keeper.tend(line.now_us);
  const std::string away = line.folder.file("away");
  fs::rename(line.backups, away);
  room::write_bytes(line.backups, "no folder");  // nor can one be made
  for (int i = 1; i < 5; ++i) {
    line.try_one(*store, i);
    keeper.tend(line.now_us);
    keeper.finish();
  }
  const auto news = keeper.take_news();
  REQUIRE(news.size() == 2);  // of the copies, and of the backup that is now due
  CHECK(news[0].find("copies of records can't be kept") != std::string::npos);
  CHECK(news[1].find("no backup was made: ") != std::string::npos);
  fs::remove(line.backups);
  fs::rename(away, line.backups);
  line.try_one(*store, 5);
  keeper.finish();
  CHECK(copied(line) == 5);
  CHECK(keeper.take_news().empty());
}

TEST_CASE("a folder that may only be read gives one sentence, and the trials go on") {
  room::SmallDisk disk("size=4m");
  if (!disk.mounted()) return;
  Line line;
  line.try_one(*line.store(), 0);
  BackupPlan plan = line.plan();
  plan.folder = disk.file("backups");
  const std::string made = line.backup();  // this disk is too small for one to be made there
  fs::create_directories(plan.folder);
  fs::copy_file(made, plan.folder + "/" + fs::path(made).filename().string());
  REQUIRE(disk.make_read_only());
  const auto store = line.store();
  Keeper keeper(store->database(), plan);
  for (int i = 1; i < 5; ++i) {
    line.try_one(*store, i);
    keeper.tend(line.now_us);
    keeper.finish();
  }
  const auto news = keeper.take_news();
  REQUIRE(news.size() == 1);
  CHECK(news[0].find("copies of records can't be kept: Read-only file system") != std::string::npos);
}

TEST_CASE("damage that a backup's audit finds lets no further board be tried") {
  Line line;
  {
    const auto store = line.store();
    for (int i = 0; i < 300; ++i) line.try_one(*store, i);  // more than a start looks at
    store->database().run("UPDATE finding SET value = 0 WHERE trial = 5 AND metric = 1");
  }
  const auto store = room::open(line.path, with_backups(line));
  line.try_one(*store, 300);
  store->upkeep();
  store->finish_upkeep();
  const std::string sentence =
      "the store is damaged: trial of FX-0000005 (station bench 1, epoch 1, record 5): the rows are not what was "
      "recorded";
  const auto refused = store->begin_trial(line.start(301));
  REQUIRE(!refused);
  CHECK(refused.error().what == sentence);
  CHECK(refused.error().to_do == restore_advice);
  const auto news = store->take_news();
  REQUIRE(news.size() == 1);
  CHECK(news[0].starts_with(sentence));
  CHECK(backups_in(line.backups).empty());
}

TEST_CASE("a program that ends does not wait for the backup under way, and leaves nothing of it") {
  Line line;
  {
    const auto store = line.store();
    for (int i = 0; i < 100; ++i) line.try_one(*store, i);
  }
  {
    const auto store = room::open(line.path, with_backups(line));
    line.try_one(*store, 100);
    store->upkeep();
  }
  for (const auto& entry : fs::directory_iterator(line.backups)) {
    const std::string name = entry.path().filename().string();
    CHECK(name.find(".part") == std::string::npos);
  }
  room::check_whole(line.path);
}
