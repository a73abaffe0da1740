#include "db/standing.hpp"

#include <doctest/doctest.h>

#include <algorithm>
#include <random>

using namespace jigwright;
using Kind = BoardEvent::Kind;

namespace {

BoardEvent tried(const std::string& id, Judgement judgement, bool withdrawn = false) {
  return {Kind::tried, id, judgement, withdrawn};
}
BoardEvent of(Kind kind, const std::string& id = {}) {
  return {kind, id, Judgement::void_, false};
}

Standing after(std::initializer_list<BoardEvent> events) {
  Standing out;
  for (const BoardEvent& e : events) out.add(e);
  return out;
}

constexpr auto go = Judgement::go;
constexpr auto no_go = Judgement::no_go;
constexpr auto void_ = Judgement::void_;

}  // namespace

TEST_CASE("the words of a board's life") {
  CHECK(after({}).state() == BoardState::fresh);
  CHECK(after({tried("1", go)}).state() == BoardState::tried);
  CHECK(after({tried("1", go), of(Kind::held, "h")}).state() == BoardState::held);
  CHECK(after({of(Kind::held, "h"), of(Kind::lifted, "h")}).state() == BoardState::released);
  CHECK(after({of(Kind::held, "h"), of(Kind::lifted, "h"), tried("1", go)}).state() == BoardState::tried);
  CHECK(after({tried("1", no_go), of(Kind::repaired)}).state() == BoardState::repaired);
  CHECK(after({tried("1", go), of(Kind::shipped)}).state() == BoardState::shipped);
  CHECK(after({tried("1", go), of(Kind::shipped), of(Kind::returned)}).state() == BoardState::tried);
  CHECK(after({of(Kind::shipped), of(Kind::scrapped)}).state() == BoardState::scrapped);
}

TEST_CASE("after a NO-GO one reseat and retest; then a repair record; a VOID counts") {
  CHECK(after({tried("1", no_go)}).may_try(1) == Bar::none);
  CHECK(after({tried("1", no_go), tried("2", no_go)}).may_try(1) == Bar::needs_repair);
  CHECK(after({tried("1", void_), tried("2", void_)}).may_try(1) == Bar::needs_repair);
  CHECK(after({tried("1", no_go)}).may_try(0) == Bar::needs_repair);
  CHECK(after({tried("1", no_go), tried("2", no_go), of(Kind::repaired)}).may_try(1) == Bar::none);
  CHECK(after({tried("1", void_), tried("2", void_), of(Kind::allowed)}).may_try(1) == Bar::none);
}

TEST_CASE("a GO after a NO-GO counts once an engineer has reviewed the NO-GO") {
  const Standing waiting = after({tried("1", no_go), tried("2", go)});
  CHECK(waiting.waits_for_review());
  CHECK(waiting.to_review() == "1");
  CHECK(waiting.may_ship() == Bar::needs_review);
  CHECK(waiting.may_try(5) == Bar::needs_review);
  const Standing reviewed = after({tried("1", no_go), tried("2", go), of(Kind::reviewed, "1")});
  CHECK(reviewed.may_ship() == Bar::none);
  CHECK(reviewed.may_try(5) == Bar::already_go);
}

TEST_CASE("a hold bars trial and shipment until each hold is lifted; lifting changes no judgement") {
  const Standing held = after({tried("1", go), of(Kind::held, "a"), of(Kind::held, "b"), of(Kind::lifted, "a")});
  CHECK(held.may_ship() == Bar::held);
  CHECK(held.may_try(1) == Bar::held);
  CHECK(after({tried("1", no_go), of(Kind::held, "a"), of(Kind::lifted, "a")}).may_ship() == Bar::not_go);
}

TEST_CASE("a trial under a withdrawn revision bars shipment, and is no reason against the next trial") {
  CHECK(after({tried("1", go, true)}).may_ship() == Bar::withdrawn);
  CHECK(after({tried("1", go, true)}).may_try(0) == Bar::none);
  CHECK(after({tried("1", go, true), tried("2", go)}).may_ship() == Bar::none);
}

namespace {

/// The same questions answered from the whole list of events, with nothing remembered.
struct Plain {
  std::vector<BoardEvent> events;

  bool any(Kind kind) const {
    return std::any_of(events.begin(), events.end(), [&](const BoardEvent& e) { return e.kind == kind; });
  }
  bool held() const {
    for (std::size_t i = 0; i < events.size(); ++i) {
      if (events[i].kind != Kind::held) continue;
      const bool lifted = std::any_of(events.begin() + static_cast<std::ptrdiff_t>(i), events.end(),
                                      [&](const auto& e) { return e.kind == Kind::lifted && e.id == events[i].id; });
      if (!lifted) return true;
    }
    return false;
  }
  bool shipped() const {
    bool out = false;
    for (const BoardEvent& e : events) {
      if (e.kind == Kind::shipped) out = true;
      if (e.kind == Kind::returned) out = false;
    }
    return out;
  }
  /// A shipment is right only if the last trial was GO under a revision that stands, nothing was repaired since, and
  /// every NO-GO of the board was reviewed.
  bool fit() const {
    const BoardEvent* last = nullptr;
    bool repaired = false;
    for (const BoardEvent& e : events) {
      if (e.kind == Kind::tried) {
        last = &e;
        repaired = false;
      }
      if (e.kind == Kind::repaired) repaired = true;
      if (e.kind != Kind::tried || e.judgement != no_go) continue;
      const bool reviewed = std::any_of(events.begin(), events.end(), [&](const auto& other) {
        return other.kind == Kind::reviewed && other.id == e.id;
      });
      if (!reviewed) return false;
    }
    return last != nullptr && last->judgement == go && !last->withdrawn && !repaired && !held() && !shipped() &&
           !any(Kind::scrapped);
  }
};

}  // namespace

TEST_CASE("100,000 random lives: no path ships a board that is held, VOID, NO-GO, unreviewed, repaired or withdrawn") {
  std::mt19937_64 random(20260109);
  int shipped = 0, barred = 0;
  for (int life = 0; life < 100'000; ++life) {
    Standing standing;
    Plain plain;
    std::vector<std::string> trials, holds;
    for (int step = 0, steps = static_cast<int>(random() % 14); step < steps; ++step) {
      BoardEvent event;
      event.kind = static_cast<Kind>(random() % 9);
      event.judgement = static_cast<Judgement>(random() % 3);
      event.withdrawn = event.kind == Kind::tried && random() % 6 == 0;
      if (event.kind == Kind::scrapped && random() % 4 != 0) continue;
      if (event.kind == Kind::tried && standing.may_try(2) != Bar::none) continue;
      if (event.kind == Kind::shipped) {
        const bool may = standing.may_ship() == Bar::none;
        REQUIRE(may == plain.fit());
        ++(may ? shipped : barred);
        if (!may) continue;
      }
      if (event.kind == Kind::tried) trials.push_back(event.id = "t" + std::to_string(trials.size()));
      if (event.kind == Kind::held) holds.push_back(event.id = "h" + std::to_string(holds.size()));
      if (event.kind == Kind::reviewed) {
        if (trials.empty()) continue;
        event.id = trials[random() % trials.size()];
      }
      if (event.kind == Kind::lifted) {
        if (holds.empty()) continue;
        event.id = holds[random() % holds.size()];
      }
      standing.add(event);
      plain.events.push_back(event);
    }
    REQUIRE((standing.may_ship() == Bar::none) == plain.fit());
  }
  MESSAGE(shipped, " shipments allowed, ", barred, " barred");
  CHECK(shipped > 1000);
}
