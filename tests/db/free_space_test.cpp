#include "db/free_space.hpp"

#include <fstream>

#include "db/sqlite.hpp"
#include "tests/db/disks.hpp"

using namespace jigwright;
using room::SmallDisk;
using room::Unprivileged;
namespace fs = std::filesystem;

namespace {

void rights(const fs::path& path, unsigned bits) {
  fs::permissions(path, fs::perms(bits));
}

}  // namespace

TEST_CASE("a disk with 32 MiB left has room for a trial, and one byte less is too little") {
  CHECK(check_space("s.db", 33'554'432).ok());
  const auto full = check_space("s.db", 33'554'431);
  REQUIRE(!full);
  CHECK(full.error().kind == Error::Kind::store);
  CHECK(full.error().what ==
        "the store's disk is nearly full: 33.6 MB are left, and 34 MB must be free before a trial begins");
  CHECK(full.error().where == "s.db");
  CHECK(full.error().to_do ==
        "free space on this disk, or name a store on another one with --store; then try the board again");
}

TEST_CASE("where the space can't be told, the trial may begin") {
  CHECK(check_space("s.db", std::nullopt).ok());
  CHECK(!space_left_bytes(":memory:").has_value());
}

TEST_CASE("the space left is what the system says of the file's disk") {
  room::TempFolder folder;
  const auto left = space_left_bytes(folder.path.string());
  REQUIRE(left.has_value());
  const auto other = fs::space(folder.path).available;
  CHECK(static_cast<double>(*left) == doctest::Approx(static_cast<double>(other)).epsilon(0.05));
}

TEST_CASE("on a small disk that is nearly full no trial begins, and the store opens for questions") {
  SmallDisk disk("size=40m");
  if (!disk.mounted()) return;
  const auto store = room::open(disk.file("s.db"));
  room::try_board(*store, "TB3-0001", Judgement::go);
  std::ofstream(disk.file("filler")) << std::string(20u << 20, 'x');
  const auto refused = store->begin_trial(room::start("TB3-0002"));
  REQUIRE(!refused);
  CHECK(refused.error().what.find("the store's disk is nearly full: ") == 0);
  CHECK(store->database().first("SELECT count(*) FROM trial") == 1);
  StoreOptions asking;
  asking.access = StoreOptions::Access::read;
  CHECK(room::open(disk.file("s.db"), asking)->show("TB3-0001").ok());
  fs::remove(disk.file("filler"));
  CHECK(store->begin_trial(room::start("TB3-0002")).ok());
}

TEST_CASE("a store on a disk that can only be read is refused at opening") {
  SmallDisk disk("size=40m");
  if (!disk.mounted()) return;
  room::open(disk.file("s.db"));
  REQUIRE(disk.make_read_only());
  const auto store = Store::open(disk.file("s.db"));
  REQUIRE(!store);
  CHECK(store.error().what == "this disk can only be read, so nothing can be recorded");
  CHECK(store.error().to_do == "make the disk writable, or name a store on another one with --store");
}

TEST_CASE("a store that may not be written is refused at opening, and named") {
  room::TempFolder folder;
  room::open(folder.file("s.db"));
  rights(folder.path, 0777);
  rights(folder.file("s.db"), 0444);
  const Unprivileged now;
  const auto store = Store::open(folder.file("s.db"));
  REQUIRE(!store);
  CHECK(store.error().what == "this file may not be written by you, so nothing can be recorded");
  CHECK(store.error().where == folder.file("s.db"));
  CHECK(store.error().to_do == "give yourself the right to write this file, or name another store with --store");
}

TEST_CASE("a folder that may not be written is refused at opening, though the file may") {
  room::TempFolder folder;
  room::open(folder.file("s.db"));
  rights(folder.file("s.db"), 0666);
  rights(folder.path, 0555);
  {
    const Unprivileged now;
    const auto store = Store::open(folder.file("s.db"));
    REQUIRE(!store);
    CHECK(store.error().what == "this folder may not be written by you, so nothing can be recorded");
    CHECK(store.error().where == folder.path.string());
  }
  rights(folder.path, 0755);
}

TEST_CASE("a missing folder, and a folder in place of a store, are named") {
  room::TempFolder folder;
  const auto missing = Store::open(folder.file("none/s.db"));
  REQUIRE(!missing);
  CHECK(missing.error().what == "this folder does not exist");
  CHECK(missing.error().where == folder.file("none"));
  const auto taken = Store::open(folder.path.string());
  REQUIRE(!taken);
  CHECK(taken.error().what == "this is a folder, not a store");
}
