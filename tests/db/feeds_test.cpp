#include "db/feeds.hpp"

#include <map>
#include <random>

#include "db/audit.hpp"
#include "db/sqlite.hpp"
#include "tests/db/desk.hpp"

using namespace jigwright;
using room::must;

namespace {

/// What a build place carries at U7: each reel, and whether for certain.
using Carrying = std::map<std::string, bool>;

struct Order {
  std::unique_ptr<Store> store = room::memory();
  std::int64_t at_us = room::noon_us;
  Order() { room::enter_two_orders(*store); }

  Database& db() { return store->database(); }
  FeedChange to(const std::string& reel, const std::string& serial) {
    return {"U7", reel, serial, {}, 0, "bench 1", "O. Perator", at_us += 1'000'000};
  }
  FeedChange at(const std::string& reel, const std::string& order, std::int64_t place) {
    return {"U7", reel, {}, order, place, "bench 1", "O. Perator", at_us += 1'000'000};
  }
  FeedChanged change(const FeedChange& change) { return must(change_reel(db(), store->uuids(), change)); }
  FeedChanged repair(const FeedChange& change) { return must(add_repair_feed(db(), store->uuids(), change)); }
  std::string fault(const FeedChange& change) {
    const auto changed = change_reel(db(), store->uuids(), change);
    REQUIRE(!changed.ok());
    CHECK(changed.error().kind == Error::Kind::usage);
    return changed.error().what + "; " + changed.error().to_do;
  }
  Carrying carrying(const std::string& serial, const std::string& designator = "U7") {
    Carrying out;
    for (const Carried& c : must(store->trace_serial(serial)).reels)
      if (c.designator == designator) {
        CHECK(!out.contains(c.reel.reel));
        out[c.reel.reel] = c.certain;
      }
    return out;
  }
  std::int64_t count(Sql sql) { return db().first(sql).value_or(-1); }
  void check_whole() {
    for (const Difference& d : must(audit(db())).differences) FAIL_CHECK(sentence(d));
  }
};

Carrying surely(const std::string& reel) {
  return {{reel, true}};
}

std::string serial(int place) {
  return (place < 10 ? "TB-0" : "TB-") + std::to_string(place);
}

}  // namespace

TEST_CASE("a reel change in the middle: before it the old reel, from the board on the new one, to the order's end") {
  Order o;
  const FeedChanged c = o.change(o.to("R-9", "TB-08"));
  CHECK(c.order == "WO-1");
  CHECK(c.from == 8);
  CHECK(c.to == 10);
  CHECK(c.before == "R-2");
  CHECK(o.carrying("TB-04") == surely("R-1"));
  CHECK(o.carrying("TB-07") == surely("R-2"));
  CHECK(o.carrying("TB-08") == surely("R-9"));
  CHECK(o.carrying("TB-10") == surely("R-9"));
  CHECK(o.carrying("TB-21") == surely("R-3"));  // another order
  o.check_whole();
}

TEST_CASE("a reel change at the first board takes back all that served the place") {
  Order o;
  const FeedChanged c = o.change(o.to("R-9", "TB-01"));
  CHECK(c.before == "R-1");
  for (int i = 1; i <= 10; ++i) CHECK(o.carrying(serial(i)) == surely("R-9"));
  CHECK(o.count("SELECT count(*) FROM feed WHERE dropped_us IS NOT NULL") == 2);
  o.check_whole();
}

TEST_CASE("a second change later in the order, and one before it, which takes it back") {
  Order o;
  o.change(o.to("R-9", "TB-07"));
  CHECK(o.change(o.to("R-3", "TB-09")).before == "R-9");
  CHECK(o.carrying("TB-06") == surely("R-2"));
  CHECK(o.carrying("TB-08") == surely("R-9"));
  CHECK(o.carrying("TB-09") == surely("R-3"));
  CHECK(o.change(o.to("R-2", "TB-08")).before == "R-9");
  CHECK(o.carrying("TB-07") == surely("R-9"));
  CHECK(o.carrying("TB-08") == surely("R-2"));
  CHECK(o.carrying("TB-10") == surely("R-2"));
  o.check_whole();
}

TEST_CASE("a change within a window: what was possible before it stays possible, and is certain from it on") {
  Order o;
  CHECK(o.carrying("TB-05") == Carrying{{"R-1", false}, {"R-2", false}});
  const FeedChanged c = o.change(o.to("R-9", "TB-05"));
  CHECK(c.before == "R-1");
  CHECK(o.carrying("TB-04") == surely("R-1"));
  CHECK(o.carrying("TB-05") == surely("R-9"));
  CHECK(o.carrying("TB-06") == surely("R-9"));
  Order p;
  p.change(p.to("R-9", "TB-06"));
  CHECK(p.carrying("TB-05") == Carrying{{"R-1", false}, {"R-2", false}});
  CHECK(p.carrying("TB-06") == surely("R-9"));
  o.check_whole();
  p.check_whole();
}

TEST_CASE("a change at a place beyond the known end serves whatever is built from there on") {
  Order o;
  const FeedChanged c = o.change(o.at("R-9", "WO-1", 12));
  CHECK(c.from == 12);
  CHECK(c.to > 1'000'000);
  CHECK(c.before.empty());
  CHECK(o.carrying("TB-10") == surely("R-2"));
  room::enter(*o.store, {{"more.csv", room::places("WO-1", 11, 14, 11)}});
  CHECK(o.carrying("TB-11").empty());
  CHECK(o.carrying("TB-12") == surely("R-9"));
  CHECK(o.carrying("TB-14") == surely("R-9"));
  CHECK(o.change(o.at("R-3", "WO-1", 14)).before == "R-9");
  CHECK(o.carrying("TB-13") == surely("R-9"));
  CHECK(o.carrying("TB-14") == surely("R-3"));
  o.check_whole();
}

TEST_CASE("what was recorded before stands, with the record that took it back") {
  Order o;
  o.change(o.to("R-9", "TB-08"));
  // R-2's feed of the list, whole, and what is left of it.
  CHECK(o.count("SELECT count(*) FROM feed f JOIN reel r ON r.id = f.reel WHERE r.name = 'R-2' AND f.poss_from = 5 AND "
                "f.cert_from = 6 AND f.cert_to = 10 AND f.poss_to = 10 AND f.dropped_us = 1767960001000000 AND "
                "f.dropped_by = (SELECT id FROM entered WHERE name = 'reel change at U7' AND who = 'O. Perator' AND "
                "kind = 'feed') AND f.entered = (SELECT id FROM entered WHERE name = 'feeds.csv')") == 1);
  CHECK(o.count("SELECT count(*) FROM feed f JOIN reel r ON r.id = f.reel WHERE r.name = 'R-2' AND f.poss_from = 5 AND "
                "f.cert_from = 6 AND f.cert_to = 7 AND f.poss_to = 7 AND f.dropped_us IS NULL") == 1);
  CHECK(o.count("SELECT count(*) FROM feed") == 5);
}

TEST_CASE("a repair's reel outranks the place's feeds on that board, whatever reel comes later") {
  Order o;
  const FeedChanged r = o.repair(o.to("R-9", "TB-07"));
  CHECK(r.from == 7);
  CHECK(r.to == 7);
  CHECK(o.carrying("TB-06") == surely("R-2"));
  CHECK(o.carrying("TB-07") == surely("R-9"));
  CHECK(o.carrying("TB-08") == surely("R-2"));
  o.change(o.to("R-3", "TB-05"));
  CHECK(o.carrying("TB-07") == surely("R-9"));
  CHECK(o.carrying("TB-08") == surely("R-3"));
  o.check_whole();
}

TEST_CASE("of two repairs the later record counts, though the clock stepped back between them") {
  // It went by the stamps once: the board carried the reel that had been taken out, or both of them.
  for (const std::int64_t step_us : {std::int64_t{3'600'000'000}, std::int64_t{1'000'000}, std::int64_t{0}}) {
    Order o;
    o.repair(o.to("R-9", "TB-07"));
    o.at_us -= step_us;
    o.repair(o.to("R-3", "TB-07"));
    CAPTURE(step_us);
    CHECK(o.carrying("TB-07") == surely("R-3"));
  }
}

TEST_CASE("an unknown reel, board or order: the nearest known one, and no record") {
  Order o;
  const auto before = o.count("SELECT count(*) FROM journal");
  CHECK(o.fault(o.to("R-99", "TB-01")) == "reel R-99 is not known; did you mean R-9?");
  CHECK(o.fault(o.to("R-9", "TB-011")) == "board TB-011 has no build place; did you mean TB-01?");
  CHECK(o.fault(o.at("R-9", "WO-11", 3)) == "order WO-11 is not known; did you mean WO-1?");
  CHECK(o.fault(o.at("R-9", "WO-1", 0)) == "the build place must be 1 or more; check the label");
  CHECK(o.fault(o.to("quite another", "TB-01")) == "reel quite another is not known; check the label");
  CHECK(o.count("SELECT count(*) FROM journal") == before);
  CHECK(o.count("SELECT count(*) FROM feed WHERE dropped_us IS NOT NULL") == 0);
  o.check_whole();
}

TEST_CASE("random lists, changes and repairs: what boards carry equals a plain list of places") {
  std::mt19937_64 random(20260109);
  const auto below = [&](int n) { return static_cast<int>(random() % static_cast<std::uint64_t>(n)); };
  int compared = 0;
  for (int round = 0; round < 12; ++round) {
    constexpr int all = 40;
    Order o;
    o.store = room::memory();
    std::vector<Carrying> plain(all + 1), repaired(all + 1);
    std::string feeds = "order,designator,reel,from,to,possible_from,possible_to\n";
    for (int from = 1, reel = 1; from <= all; ++reel) {
      const int to = std::min(all, from + below(15)), window = to < all ? std::min(below(4), to - from) : 0;
      const std::string name = "R-" + std::to_string(1 + reel % 3);
      const int begins = from == 1 ? 1 : from - 2 > 0 ? from - 2 : 1;
      feeds += "WO-1,U7," + name + "," + std::to_string(from) + "," + std::to_string(to - window) + "," +
               std::to_string(begins) + "," + std::to_string(to) + "\n";
      for (int i = begins; i <= to; ++i) {
        const bool certain = i >= from && i <= to - window;
        plain[static_cast<std::size_t>(i)][name] = certain || plain[static_cast<std::size_t>(i)][name];
      }
      from = to + 1;
    }
    room::enter(
        *o.store,
        {{"boards.csv", room::places("WO-1", 1, all, 1)}, {"reels.csv", room::two_reels}, {"feeds.csv", feeds}});
    const std::string names[] = {"R-1", "R-2", "R-3", "R-9"};
    for (int step = 0; step < 6; ++step) {
      const int place = 1 + below(all);
      const std::string& reel = names[below(4)];
      if (below(3) == 0) {
        o.repair(o.to(reel, serial(place)));
        repaired[static_cast<std::size_t>(place)] = surely(reel);
      } else {
        o.change(o.to(reel, serial(place)));
        for (int i = place; i <= all; ++i) plain[static_cast<std::size_t>(i)] = surely(reel);
      }
      for (int i = 1; i <= all; ++i) {
        const auto at = static_cast<std::size_t>(i);
        CAPTURE(round);
        CAPTURE(step);
        CAPTURE(i);
        REQUIRE(o.carrying(serial(i)) == (repaired[at].empty() ? plain[at] : repaired[at]));
        ++compared;
      }
    }
    o.check_whole();
  }
  CHECK(compared == 12 * 6 * 40);
}
