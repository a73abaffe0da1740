#include "db/copying.hpp"

#include "tests/db/disks.hpp"
#include "tests/db/line.hpp"

using namespace jigwright;
using room::Line;
using room::must;
namespace fs = std::filesystem;

namespace {

std::string copies(const Line& line) {
  return line.backups + "/000001.records";
}

std::int64_t records_in(const std::string& path) {
  const std::string bytes = room::bytes_of(path);
  CopySet set;
  const auto head = head_length(bytes, "");
  REQUIRE(head.has_value());
  CHECK(read_frames(std::string_view(bytes).substr(*head), set) == bytes.size() - *head);
  std::int64_t out = 0;
  for (const auto& [uuid, chain] : set.chains) out += static_cast<std::int64_t>(chain.size());
  return out;
}

}  // namespace

TEST_CASE("each record behind the backup is copied once") {
  Line line;
  const auto store = line.store();
  line.try_one(*store, 0);
  RecordCopies mine(store->database(), line.backups);
  CHECK(must(mine.catch_up()) == 0);  // there is no backup yet
  line.backup();
  CHECK(must(mine.catch_up()) == 0);
  line.try_one(*store, 1);
  line.try_one(*store, 2);
  CHECK(must(mine.catch_up()) == 2);
  CHECK(must(mine.catch_up()) == 0);
  CHECK(records_in(copies(line)) == 2);
  RecordCopies other(store->database(), line.backups);
  CHECK(must(other.catch_up()) == 0);
}

TEST_CASE("copies that were cut off, emptied, removed or replaced beneath the program are made good from the store") {
  Line line;
  const auto store = line.store();
  line.try_one(*store, 0);
  line.backup();
  RecordCopies mine(store->database(), line.backups);
  for (int i = 1; i < 5; ++i) line.try_one(*store, i);
  CHECK(must(mine.catch_up()) == 4);
  SUBCASE("cut off within a record") {
    fs::resize_file(copies(line), fs::file_size(copies(line)) - 7);
  }
  SUBCASE("emptied") {
    fs::resize_file(copies(line), 0);
  }
  SUBCASE("removed") {
    fs::remove(copies(line));
  }
  SUBCASE("replaced by an older state") {
    room::write_bytes(line.folder.file("older"), room::bytes_of(copies(line)).substr(0, 900));
    fs::rename(line.folder.file("older"), copies(line));
  }
  line.try_one(*store, 5);
  must(mine.catch_up());
  CHECK(records_in(copies(line)) == 5);
}

TEST_CASE("a torn end is cut off, and what stood there copied again; damage in the middle loses nothing behind it") {
  Line line;
  const auto store = line.store();
  line.try_one(*store, 0);
  line.backup();
  for (int i = 1; i < 5; ++i) line.try_one(*store, i);
  line.copy(*store);
  const std::string good = room::bytes_of(copies(line));
  SUBCASE("torn") {
    fs::resize_file(copies(line), good.size() - 20);
  }
  SUBCASE("damaged") {
    room::flip(copies(line), good.find("FX-0000003"));
  }
  line.try_one(*store, 5);
  line.copy(*store);
  const std::string bytes = room::bytes_of(copies(line));
  CopySet set;
  const auto head = head_length(bytes, "");
  CHECK(read_all_frames(std::string_view(bytes).substr(*head), set).end == bytes.size() - *head);
  CHECK(set.chains.begin()->second.size() == 5);
}

TEST_CASE("a folder that has no backup any more is an error, once there was one") {
  Line line;
  const auto store = line.store();
  line.try_one(*store, 0);
  line.backup();
  RecordCopies mine(store->database(), line.backups);
  CHECK(must(mine.catch_up()) == 0);
  fs::rename(line.backups, line.folder.file("away"));
  line.try_one(*store, 1);
  const auto failed = mine.catch_up();
  REQUIRE(!failed);
  CHECK(failed.error().what == "copies of records can't be kept: the folder has no backup any more");
  fs::rename(line.folder.file("away"), line.backups);
  CHECK(must(mine.catch_up()) == 1);
}

TEST_CASE("a quota that strikes in the middle of a copy: the next call catches up") {
  Line line;
  const auto store = line.store();
  line.try_one(*store, 0);
  line.backup();
  for (int i = 1; i < 20; ++i) line.try_one(*store, i);
  RecordCopies mine(store->database(), line.backups);
  {
    const room::FileLimit limit(9'000);
    CHECK(!mine.catch_up());
    CHECK(!mine.catch_up());
  }
  must(mine.catch_up());
  CHECK(records_in(copies(line)) == 19);
}

TEST_CASE("a record that is not as it was made is not copied, and the store called damaged") {
  Line line;
  const auto store = line.store();
  line.try_one(*store, 0);
  line.backup();
  for (int i = 1; i < 5; ++i) line.try_one(*store, i);
  line.try_one(*store, 6, Judgement::go, 2);
  store->database().run("UPDATE finding SET value = 1 WHERE trial = 4 AND metric = 1");
  RecordCopies mine(store->database(), line.backups);
  const auto failed = mine.catch_up();
  REQUIRE(!failed);
  CHECK(mine.damaged());
  CHECK(failed.error().what ==
        "the store is damaged: trial (station bench 1, epoch 1, record 4): the rows are not what was recorded");
  CHECK(records_in(copies(line)) == 3);  // two before it, and the other station's
}

TEST_CASE(
    "a second copy of the store that writes to the same folder is noticed, and the first one's records are kept") {
  Line line;
  const auto store = line.store();
  line.try_one(*store, 0);
  line.backup();
  RecordCopies mine(store->database(), line.backups);
  line.try_one(*store, 1);
  must(mine.catch_up());
  const std::string second = line.folder.file("second.db");
  must(restore(second, line.backups, "", line.now_us));
  {
    const auto other = room::open(second);
    line.try_one(*other, 7);
    line.copy(*other);
  }
  line.try_one(*store, 2);
  const auto told = mine.catch_up();
  REQUIRE(!told);
  CHECK(told.error().what == "another copy of this store writes its records of station bench 1 here too");
  CHECK(!mine.damaged());
  const std::string bytes = room::bytes_of(copies(line));
  CHECK(bytes.find("FX-0000003") != std::string::npos);
}

TEST_CASE("copies of another store in the folder are left alone") {
  Line line, other;
  const auto store = line.store();
  line.try_one(*store, 0);
  line.backup();
  room::write_bytes(copies(line), copies_head(std::string(16, 'x')));
  line.try_one(*store, 1);
  RecordCopies mine(store->database(), line.backups);
  const auto refused = mine.catch_up();
  REQUIRE(!refused);
  CHECK(refused.error().what == "these copies are of another store");
  CHECK(room::bytes_of(copies(line)) == copies_head(std::string(16, 'x')));
}
