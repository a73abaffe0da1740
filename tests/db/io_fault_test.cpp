// One fault of the disk at each operation of a whole trial, for every operation: opening the store, beginning and
// ending the trial, closing the store.
#include "db/sqlite.hpp"
#include "tests/db/fault_vfs.hpp"
#include "tests/db/record_check.hpp"
#include "tests/db/room.hpp"

using namespace jigwright;
using room::Kept;
using Failure = room::FaultDisk::Failure;

namespace {

constexpr const char* path = "store.db";
constexpr std::int64_t audited_every = 7;  ///< operations

struct Case {
  Failure failure;
  bool lasting;    ///< the disk goes on failing until it is healed
  bool power_cut;  ///< the power goes at the end, before the store is closed
  int pages;       ///< of the write-ahead log, before it is copied into the main file
};

/// What the program was told about the trial under the fault.
struct Told {
  bool opened{false}, began{false}, ended{false};
  OpenTrial trial;
};

class Fault {
 public:
  Fault(const Case& c, const room::Factory& factory, const room::FaultDisk::Image& image)
      : disk(7), case_(c), factory_(factory) {
    disk.start_from(image);
  }

  /// Board 1 with the n-th operation failing, then board 2 on the healed disk, by the same store if it opened.
  void play(std::int64_t n) {
    disk.fail_at(n, case_.failure, case_.lasting);
    {
      auto store = Store::open(path);
      told.opened = store.ok();
      if (store) {
        store.value()->database().script(case_.pages == 1 ? "PRAGMA wal_autocheckpoint = 1"
                                                          : "PRAGMA wal_autocheckpoint = 1000");
        store.value()->database().clear_error();
        try_under_fault(*store.value());
        fired = disk.fired();
        disk.heal();
        after_ok = log(*store.value(), 2);
        if (case_.power_cut) disk.cut_at(1);
      } else {
        if (store.error().what.empty() || store.error().to_do.empty()) complaints += "an error that does not help\n";
        fired = disk.fired();
        disk.heal();
      }
    }
    if (case_.power_cut) disk.power_up();
    compare(n % audited_every == 0);
  }

  room::FaultDisk disk;
  Told told;
  bool fired{false}, after_ok{true};
  Kept kept{Kept::nothing};
  std::string complaints;

 private:
  void try_under_fault(Store& store) {
    const auto open = store.begin_trial(factory_.start(1));
    told.began = open.ok();
    if (!open) return check_words(open.error());
    told.trial = open.value();
    const auto done = store.finish_trial(open.value(), factory_.end(1));
    told.ended = done.ok();
    if (!done) check_words(done.error());
  }
  void check_words(const Error& error) {
    if (error.kind != Error::Kind::store || error.what.empty() || error.to_do.empty())
      complaints += "an error that does not help: " + describe(error) + "\n";
  }
  bool log(Store& store, std::int64_t board) {
    const auto open = store.begin_trial(factory_.start(board));
    if (!open) return false;
    const bool done = store.finish_trial(open.value(), factory_.end(board)).ok();
    if (done) healthy_.push_back(open.value());
    return done;
  }
  void compare(bool audited) {
    auto store = Store::open(path);
    if (!store) {
      complaints += describe(store.error()) + "\n";
      return;
    }
    const room::Held held = room::held(*store.value(), factory_, audited);
    complaints += held.complaints;
    for (const OpenTrial& trial : healthy_)
      if (held.of(trial) != Kept::whole) complaints += "a trial on the healthy disk is lost\n";
    if (told.began) kept = held.of(told.trial);
    if (!log(*store.value(), 3)) complaints += "no further trial can be logged\n";
  }

  Case case_;
  const room::Factory& factory_;
  std::vector<OpenTrial> healthy_;
};

room::Factory four_boards() {
  return room::Factory({1, 1000, 500, 40, 200});
}

/// A store with one trial, closed.
room::FaultDisk::Image with_one_trial(const room::Factory& factory) {
  room::FaultDisk disk(7);
  {
    const auto store = room::open(path);
    const OpenTrial open = room::must(store->begin_trial(factory.start(0)));
    room::must(store->finish_trial(open, factory.end(0)));
  }
  return disk.image();
}

/// Faults at operation 1, 2, 3 ... until none fires; returns how many there were.
std::int64_t every_operation(const Case& c) {
  const room::Factory factory = four_boards();
  const auto image = with_one_trial(factory);
  for (std::int64_t n = 1;; ++n) {
    Fault fault(c, factory, image);
    fault.play(n);
    INFO("operation ", n, fault.complaints);
    REQUIRE(fault.complaints.empty());
    if (fault.told.ended) REQUIRE(fault.kept == Kept::whole);
    if (fault.told.began) REQUIRE(fault.kept != Kept::nothing);
    REQUIRE(fault.after_ok);
    if (fault.fired) continue;
    REQUIRE(fault.told.ended);
    return n - 1;
  }
}

}  // namespace

TEST_CASE("a disk fault at any operation of a trial: an error or the full record, and the next trial is logged") {
  for (bool lasting : {false, true})
    for (bool cut : {false, true})
      for (int pages : {1, 1000}) {
        CAPTURE(lasting);
        CAPTURE(cut);
        CAPTURE(pages);
        const std::int64_t io = every_operation({Failure::io, lasting, cut, pages});
        MESSAGE("I/O error at each of ", io, " operations");
        CHECK(io > 40);
      }
}

TEST_CASE("a disk that fills up at any write of a trial: an error or the full record, and the next trial is logged") {
  for (bool cut : {false, true})
    for (int pages : {1, 1000}) {
      CAPTURE(cut);
      CAPTURE(pages);
      const std::int64_t full = every_operation({Failure::full, true, cut, pages});
      MESSAGE("full disk at each of ", full, " writes");
      CHECK(full > 10);
    }
}

TEST_CASE("a full disk is called so, with what to do") {
  room::FaultDisk disk(1);
  const room::Factory factory({});
  auto store = room::open(path);
  disk.fail_at(1, Failure::full, true);
  const auto open = store->begin_trial(factory.start(0));
  REQUIRE(!open);
  CHECK(open.error().what == "the store can't be used: database or disk is full");
  CHECK(open.error().to_do == "free space on the disk, then repeat");
}

TEST_CASE("a disk fault at any operation while a store is made leaves no file that can't be opened afterwards") {
  for (std::int64_t n = 1;; ++n) {
    room::FaultDisk disk(static_cast<std::uint64_t>(n));
    disk.fail_at(n, Failure::io, false);
    { const auto store = Store::open(path); }
    const bool fired = disk.fired();
    disk.heal();
    const auto again = Store::open(path);
    REQUIRE_MESSAGE(again, "operation ", n);
    REQUIRE(room::held(*again.value(), room::Factory({})).complaints.empty());
    if (!fired) break;
  }
}

TEST_CASE("a page that changed on the disk is reported, not taken for a record") {
  room::FaultDisk disk(1);
  const room::Factory factory({1, 20, 20, 40, 200});
  {
    auto store = room::open(path);
    REQUIRE(factory.fill(*store));
  }
  for (std::size_t at = 0; at < 16; ++at) disk.damage(path, at);  // the file's magic
  const auto store = Store::open(path);
  REQUIRE(!store);
  CHECK(store.error().what == "this file is not a store");
}
