#include "db/revisions.hpp"

#include "db/audit.hpp"
#include "db/digest.hpp"
#include "db/sqlite.hpp"
#include "tests/db/desk.hpp"

using namespace jigwright;
using room::must;

namespace {

RevisionFiles files(const std::string& name) {
  return {"[plan] " + name, "[jig]", "[limits] " + name};
}

struct Bench {
  std::unique_ptr<Store> store = room::memory();
  Bench() { room::enter_two_orders(*store); }

  Result<Adopted> try_adopt(const std::string& name, const std::string& order = {}, bool earlier_stand = true) {
    Adopting a;
    a.files = files(name);
    a.order = order;
    a.station = "office";
    a.who = "E. Engineer";
    a.second = "Q. Lead";
    a.reason = "adopts " + name;
    a.earlier_stand = earlier_stand;
    a.at_us = room::noon_us;
    return jigwright::adopt(store->database(), store->uuids(), a);
  }
  Adopted adopt(const std::string& name, const std::string& order = {}) { return must(try_adopt(name, order)); }
  Adopted adopt_again(const std::string& name, const std::string& order = {}) {
    return must(try_adopt(name, order, false));
  }
  void tries(const std::string& serial, const RevisionFiles& with, const std::string& order = "WO-1",
             Judgement judgement = Judgement::go) {
    TrialStart start = room::start(serial);
    start.order = order;
    start.documents = {
        {"plan", "plan.toml", with.plan}, {"jig", "jig.toml", with.jig}, {"limits", "limits.toml", with.limits}};
    must(store->finish_trial(must(store->begin_trial(start)), room::end(judgement)));
  }
  void tries(const std::string& serial, const std::string& name, const std::string& order = "WO-1") {
    tries(serial, files(name), order);
  }
  Bar ship(const std::string& serial) { return room::shipment_bar(*store, serial); }
  std::optional<std::int64_t> adopted(const std::string& serial) {
    return must(store->show(serial)).trials.back().adopted;
  }
  std::optional<Adopted> in_force(const std::string& order) { return adopted_for(store->database(), order); }
};

}  // namespace

TEST_CASE("before anything is adopted, nothing is in force, and trials say so") {
  Bench b;
  b.tries("TB-01", "A");
  CHECK(!b.in_force("WO-1"));
  CHECK(!b.in_force(""));
  CHECK(!b.adopted("TB-01"));
  CHECK(b.ship("TB-01") == Bar::none);
}

TEST_CASE("an adopted revision names its files, its number, its parent, and who stands for it") {
  Bench b;
  const Adopted first = b.adopt("A");
  CHECK(first.number == 1);
  CHECK(first.parent.empty());
  const Adopted own = b.adopt("B", "WO-1");
  CHECK(own.number == 2);
  CHECK(own.parent == text(first.uuid));  // what was in force for the order
  const Adopted next = b.adopt("C");
  CHECK(next.number == 3);
  CHECK(next.parent == text(first.uuid));
  const auto all = all_adopted(b.store->database());
  REQUIRE(all.size() == 3);
  const Adopted& held = all[1];
  CHECK(held.uuid == own.uuid);
  CHECK(held.order == "WO-1");
  CHECK(held.plan == hex(sha256("[plan] B")));
  CHECK(held.jig == hex(sha256("[jig]")));
  CHECK(held.limits == hex(sha256("[limits] B")));
  CHECK(held.who == "E. Engineer");
  CHECK(held.second == "Q. Lead");
  CHECK(held.reason == "adopts B");
  CHECK(held.authority == "office");
  CHECK(held.at_us == room::noon_us);
  CHECK(held.earlier_stand);
  CHECK(must(audit(b.store->database())).whole());
}

TEST_CASE("its files' texts are kept") {
  Bench b;
  b.adopt("A");
  for (const std::string& body : {std::string("[plan] A"), std::string("[jig]"), std::string("[limits] A")})
    CHECK(b.store->database().first("SELECT count(*) FROM document WHERE body = ?", body) == 1);
}

TEST_CASE("the same files twice are refused for the same boards, and taken for others") {
  Bench b;
  b.adopt("A");
  const auto twice = b.try_adopt("A");
  REQUIRE(!twice.ok());
  CHECK(twice.error().kind == Error::Kind::usage);
  CHECK(twice.error().what == "these files are in force already, as revision 1");
  CHECK(all_adopted(b.store->database()).size() == 1);
  CHECK(b.adopt("A", "WO-1").number == 2);
  CHECK(!b.try_adopt("A", "WO-1").ok());
  CHECK(b.adopt("B").number == 3);
  CHECK(b.adopt("A").number == 4);  // back again
}

TEST_CASE("an order's own revision goes before one for every order, also before a later one") {
  Bench b;
  b.adopt("A");
  CHECK(b.in_force("WO-1")->number == 1);
  b.adopt("B", "WO-1");
  b.adopt("C");
  CHECK(b.in_force("WO-1")->number == 2);
  CHECK(b.in_force("WO-2")->number == 3);
  CHECK(b.in_force("")->number == 3);
}

TEST_CASE("what differs from the revision in force is named") {
  Bench b;
  const Adopted a = b.adopt("A");
  CHECK(differing(a, files("A")).empty());
  CHECK(differing(a, {"[plan] A", "[jig]", "[limits] A "}) == "limits");
  CHECK(differing(a, {"[plan] B", "[jig]", "[limits] B"}) == "plan and limits");
  CHECK(differing(a, {"", "", ""}) == "plan and jig and limits");
}

TEST_CASE("a trial says which revision it was played under: none in force, other files, or the number") {
  Bench b;
  b.tries("TB-01", "A");
  b.adopt("A");
  b.adopt("B", "WO-2");
  b.tries("TB-02", "A");
  b.tries("TB-03", "B");
  b.tries("TB-04", {"[plan] A", "[jig] other", "[limits] A"});
  b.tries("TB-21", "B", "WO-2");
  b.tries("TB-22", "A", "WO-2");
  CHECK(b.adopted("TB-01") == std::nullopt);
  CHECK(b.adopted("TB-02") == 1);
  CHECK(b.adopted("TB-03") == 0);
  CHECK(b.adopted("TB-04") == 0);
  CHECK(b.adopted("TB-21") == 2);
  CHECK(b.adopted("TB-22") == 0);
  CHECK(must(audit(b.store->database())).whole());
}

TEST_CASE("`earlier stand` leaves trials before it as they are") {
  Bench b;
  b.tries("TB-01", "A");
  b.adopt("B");
  b.tries("TB-02", "B");
  b.adopt("C");
  CHECK(b.ship("TB-01") == Bar::none);
  CHECK(b.ship("TB-02") == Bar::none);
  CHECK(room::trial_bar(*b.store, "TB-01") == Bar::already_go);
}

TEST_CASE("`earlier again` withdraws trials before it, but not those with its own files") {
  Bench b;
  b.adopt("A");
  b.tries("TB-01", "A");
  b.tries("TB-02", "B");  // the engineer's, before it was adopted
  b.adopt_again("B");
  CHECK(b.ship("TB-01") == Bar::withdrawn);
  CHECK(b.ship("TB-02") == Bar::none);
  CHECK(room::trial_bar(*b.store, "TB-01", 0) == Bar::none);
  b.tries("TB-01", "B");
  CHECK(b.ship("TB-01") == Bar::none);
  CHECK(sentence(Bar::withdrawn, room::now(*b.store, "TB-01")) ==
        "Board TB-01 was not tried under a revision that stands for its order.");
}

TEST_CASE("a return to earlier files lets their trials stand again") {
  Bench b;
  b.adopt("A");
  b.tries("TB-01", "A");
  b.adopt_again("B");
  b.adopt("A");
  CHECK(b.ship("TB-01") == Bar::none);
}

TEST_CASE("a second `earlier again` withdraws what the first one let stand") {
  // Only the first one was asked once: the board shipped under files that the newest one withdrew.
  Bench b;
  b.adopt("A");
  b.tries("TB-01", "B");
  b.adopt_again("B");
  b.adopt_again("C");
  CHECK(b.ship("TB-01") == Bar::withdrawn);
}

TEST_CASE("`earlier again` for a changed jig alone withdraws as well") {
  // The jig's file was not compared once: the adoption said that trials don't count, and they did.
  Bench b;
  b.adopt("A");
  b.tries("TB-01", "A");
  Adopting a;
  a.files = {"[plan] A", "[jig] rebuilt", "[limits] A"};
  a.station = "office";
  a.who = "E. Engineer";
  a.reason = "rebuilt";
  a.earlier_stand = false;
  must(jigwright::adopt(b.store->database(), b.store->uuids(), a));
  CHECK(b.ship("TB-01") == Bar::withdrawn);
}

TEST_CASE("`earlier again` for one order leaves others alone; one for every order leaves orders with their own alone") {
  // A revision for every order once withdrew trials of an order that has its own.
  Bench b;
  b.adopt("A");
  b.tries("TB-01", "A");
  b.tries("TB-21", "A", "WO-2");
  b.adopt_again("B", "WO-2");
  CHECK(b.ship("TB-01") == Bar::none);
  CHECK(b.ship("TB-21") == Bar::withdrawn);
  b.tries("TB-21", "B", "WO-2");
  b.adopt_again("C");
  CHECK(b.ship("TB-01") == Bar::withdrawn);
  CHECK(b.ship("TB-21") == Bar::none);
}

TEST_CASE("files that are in force for every order do not help an order that has its own") {
  // They did once: a general revision after the order's own let the withdrawn trial ship.
  Bench b;
  b.tries("TB-21", "A", "WO-2");
  b.adopt_again("B", "WO-2");
  b.adopt("A");
  CHECK(b.ship("TB-21") == Bar::withdrawn);
}

TEST_CASE("a GO with other files than those in force is not fit for shipment, until just they are adopted") {
  // It was once: an engineer's trial of a laxer plan let the board go.
  Bench b;
  b.adopt("A");
  b.tries("TB-01", "B");
  CHECK(b.ship("TB-01") == Bar::withdrawn);
  CHECK(room::trial_bar(*b.store, "TB-01", 0) == Bar::none);
  b.adopt("C");
  CHECK(b.ship("TB-01") == Bar::withdrawn);
  b.adopt("B");
  CHECK(b.ship("TB-01") == Bar::none);
}

TEST_CASE("a trial with files that were in force before is played beside the revision") {
  Bench b;
  b.adopt("A");
  b.adopt("B");
  b.tries("TB-01", "A");
  CHECK(b.adopted("TB-01") == 0);
  CHECK(b.ship("TB-01") == Bar::withdrawn);
}
