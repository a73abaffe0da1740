#include "sequencer/arrange.hpp"

#include <doctest/doctest.h>

#include <map>

#include "fake_bench.hpp"

using namespace jigwright;
using namespace jigwright::test;

namespace {

Setting setting(std::string id, int step, int group, RelaySet own, Phase phase = Phase::powered) {
  Setting s;
  s.id = std::move(id);
  s.step = step;
  s.group = group;
  s.own = own;
  s.phase = phase;
  return s;
}

std::string order_of(const std::vector<Setting>& settings) {
  std::string out;
  for (const Setting& s : settings) out += s.id;
  return out;
}

}  // namespace

TEST_CASE("phases come in their order whatever the plan's order of steps") {
  const Jig jig = small_jig();
  const SwitchingRules rules(jig);
  auto out = arrange(
      {setting("p", 0, -1, {}), setting("u", 1, -1, {}, Phase::unpowered), setting("c", 2, -1, {}, Phase::contact)},
      rules);
  CHECK(order_of(out) == "cup");
}

TEST_CASE("inside a group the relays move least, and a group is never mixed with another") {
  const Jig jig = small_jig();
  const SwitchingRules rules(jig);
  // a and c share their relays, so c is moved next to a; d is of another group and stays behind.
  auto out = arrange({setting("a", 0, 0, relays({0, 4})), setting("b", 0, 0, relays({0, 5})),
                      setting("c", 0, 0, relays({0, 4})), setting("d", 0, 1, relays({0, 4}))},
                     rules);
  CHECK(order_of(out) == "acbd");
}

TEST_CASE("group -1 keeps its place") {
  const Jig jig = small_jig();
  const SwitchingRules rules(jig);
  auto out = arrange(
      {setting("a", 0, -1, relays({4})), setting("b", 0, -1, relays({5})), setting("c", 0, -1, relays({4}))}, rules);
  CHECK(order_of(out) == "abc");
}

TEST_CASE("the longest waiting nest is picked, and nothing younger overtakes it for what it needs") {
  const std::vector<Waiting> waiting{{2, use_meter, 5}, {1, use_meter | use_source, 3}, {3, use_detector, 9}};
  CHECK(pick(waiting, 0) == 1u);
  // The source is busy: nest 1 waits on, and nest 2 may not take the meter before it; the detector is free for nest 3.
  CHECK(pick(waiting, use_source) == 2u);
  CHECK_FALSE(pick(waiting, use_source | use_detector));
}

TEST_CASE("a transition names every relay that differs and nothing else") {
  const Jig jig = small_jig();
  const SwitchingRules rules(jig);
  NestState from;
  from.closed = relays({0, 2, 4});
  const Transition t = transition(from, setting("x", 0, 0, relays({0, 5})), rules);
  CHECK(t.opens == relays({2, 4}));
  CHECK(t.closes == relays({5}));
  CHECK(moves(t) == 3);
  // Release 4 ms, then operate 5 ms: one after the other.
  CHECK(transition_s(t, rules) == doctest::Approx(0.009));
}
