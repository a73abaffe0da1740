// Power cuts while trials are logged. JIGWRIGHT_POWER_CUTS sets how many (1,000 without it).
#include <cstdlib>

#include "db/sqlite.hpp"
#include "tests/db/fault_vfs.hpp"
#include "tests/db/record_check.hpp"
#include "tests/db/room.hpp"

using namespace jigwright;
using room::Kept;

namespace {

constexpr const char* path = "store.db";
constexpr int cuts_a_disk = 5;

int cuts_wanted() {
  const char* text = std::getenv("JIGWRIGHT_POWER_CUTS");
  return text == nullptr ? 1000 : std::max(1, std::atoi(text));
}

/// One disk over a few power cuts, and every trial that the store said yes to.
class Bench {
 public:
  explicit Bench(std::uint64_t seed) : disk(seed), draw_(seed), factory_({seed, 1'000'000, 5000, 40, 200}) {}

  /// Opens the store and logs trials until the power goes; returns false when it never opened.
  void work_until_cut(const char* pragma = nullptr) {
    disk.cut_at(1 + static_cast<std::int64_t>(draw_() % 400));
    {
      auto store = Store::open(path);
      if (store) {
        // Small write-ahead logs, so that copies into the main file are cut as well.
        const char* sizes[] = {"PRAGMA wal_autocheckpoint = 1000", "PRAGMA wal_autocheckpoint = 30",
                               "PRAGMA wal_autocheckpoint = 4"};
        store.value()->database().script(sizes[draw_() % 3]);
        if (pragma != nullptr) store.value()->database().script(pragma);
        while (!disk.dark()) log_one(*store.value());
      }
    }
    disk.power_up();
  }

  /// What the store said and does not hold.
  void compare(bool audited = false) {
    auto store = Store::open(path);
    if (!store) {
      complaints += describe(store.error()) + "\n";
      return;
    }
    const room::Held held = room::held(*store.value(), factory_, audited);
    complaints += held.complaints;
    for (const auto& [open, ended] : told_) {
      const Kept kept = held.of(open);
      if (kept == Kept::nothing || (ended && kept != Kept::whole)) ++lost;
    }
    whole += ended_;
    ended_ = 0;
  }

  room::FaultDisk disk;
  std::string complaints;
  int lost{0}, whole{0};

 private:
  void log_one(Store& store) {
    const std::int64_t board = next_++;
    const auto open = store.begin_trial(factory_.start(board));
    if (!open) return;
    told_.emplace_back(open.value(), false);
    const auto done = store.finish_trial(open.value(), factory_.end(board));
    told_.back().second = done.ok();
    ended_ += done.ok() ? 1 : 0;
  }

  std::mt19937_64 draw_;
  room::Factory factory_;
  std::int64_t next_{0};
  int ended_{0};
  std::vector<std::pair<OpenTrial, bool>> told_;
};

}  // namespace

TEST_CASE("after a power cut at any operation, every trial that the store took is whole and nothing is half there") {
  int lost = 0, whole = 0, cuts = 0;
  for (std::uint64_t seed = 1; cuts < cuts_wanted(); ++seed) {
    Bench bench(seed);
    for (int i = 0; i < cuts_a_disk; ++i, ++cuts) {
      bench.work_until_cut();
      bench.compare(i == cuts_a_disk - 1);
      REQUIRE_MESSAGE(bench.complaints.empty(), "seed ", seed, ", cut ", i, ": ", bench.complaints);
    }
    lost += bench.lost;
    whole += bench.whole;
  }
  MESSAGE(cuts, " power cuts, ", whole, " ended trials, ", lost, " lost");
  CHECK(lost == 0);
  CHECK(whole > cuts);  // the cuts fell among trials
}

TEST_CASE("the disk of these tests forgets: a store that syncs less loses trials at power cuts") {
  int hurt = 0;
  for (std::uint64_t seed = 1; seed <= 20; ++seed) {
    Bench bench(seed);
    bench.work_until_cut("PRAGMA synchronous = OFF");
    bench.compare();
    hurt += bench.lost > 0 || !bench.complaints.empty() ? 1 : 0;
  }
  CHECK(hurt > 5);
}
