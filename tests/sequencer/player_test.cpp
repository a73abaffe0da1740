#include "sequencer/player.hpp"

#include <doctest/doctest.h>

#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>

#include "fake_bench.hpp"

using namespace jigwright;
using namespace jigwright::test;

namespace {

struct Nobody : Person {
  Task<Result<Reading>> ask(int, const Ask&, Duration) override {
    co_return Error{Error::Kind::person, "nobody", {}, {}};
  }
};

struct Stage {
  asio::io_context io;
  std::unique_ptr<Clock> clock = make_virtual_clock();
  FakeBench bench{*clock};
  Jig jig = small_jig();
  Leases leases{io};
  SwitchingRules rules{jig};
  Nobody person;
  StopSignal stop;
  Player player{bench, leases, rules, person, stop, 1};

  template <class T>
  T await(Task<T> task) {
    std::optional<T> out;
    auto keep = [](Task<T> t, std::optional<T>& to) -> Task<void> { to.emplace(co_await std::move(t)); };
    asio::co_spawn(io, keep(std::move(task), out), asio::detached);
    clock->run(io);
    REQUIRE(out.has_value());
    return std::move(*out);
  }
};

Setting powered(RelaySet own, RelaySet bus) {
  Setting s;
  s.id = "test";
  s.own = own | relays({3});
  s.bus = bus;
  s.supply.rail_V = 12;
  s.supply.limit_A = 0.1;
  ReadMeter act;
  act.setup.range = 10;
  act.setup.integration_s = 0.02;
  s.act = act;
  s.stop = Fixed{};
  s.resources = use_meter;
  return s;
}

std::size_t position(const std::vector<std::string>& log, const std::string& what) {
  for (std::size_t i = 0; i < log.size(); ++i)
    if (log[i].find(what) != std::string::npos) return i;
  return log.size();
}

}  // namespace

TEST_CASE("the lid is read, relays close, then power comes, then the meter reads") {
  Stage t;
  const Setting s = powered(relays({2}), relays({0}));
  const auto record = t.await(t.player.play(s, 7, {}));
  REQUIRE(record.ok());
  CHECK(record.value().setting == 7);
  CHECK(record.value().ended == Next::enough);
  const auto& log = t.bench.log;
  CHECK(position(log, "lid read") < position(log, "close"));
  CHECK(position(log, "close") < position(log, "supply 12 V"));
  CHECK(position(log, "supply 12 V") < position(log, "meter read"));
}

TEST_CASE("no power with the lid open") {
  Stage t;
  t.bench.lid_is_closed = false;
  const Setting s = powered({}, relays({0}));
  const auto record = t.await(t.player.play(s, 0, {}));
  REQUIRE_FALSE(record.ok());
  CHECK(record.error().what == "the lid is open");
  CHECK(position(t.bench.log, "supply") == t.bench.log.size());
}

TEST_CASE("relays that leave have opened before others close, and a load is not switched under drive") {
  Stage t;
  Setting driven = powered(relays({4}), relays({0, 1}));
  driven.source.dc_V = 0.05;
  driven.resources = use_meter | use_source;
  REQUIRE(t.await(t.player.play(driven, 0, {})).ok());
  Setting other = driven;
  other.own = relays({3, 5});
  t.bench.log.clear();
  REQUIRE(t.await(t.player.play(other, 1, {})).ok());
  const auto& log = t.bench.log;
  CHECK(position(log, "source 0 V") < position(log, "open"));
  CHECK(position(log, "open") < position(log, "close"));
  CHECK(position(log, "close") < position(log, "source 0.05 V"));
}

TEST_CASE("settling counts from the last change, and not again for a second reading of the same state") {
  Stage t;
  Setting s = powered({}, relays({0}));
  s.settle_s = 0.5;
  REQUIRE(t.await(t.player.play(s, 0, {})).ok());
  const double first_s = seconds(t.clock->now());
  // 5 ms relays + 5 ms supply + 500 ms settling + 20 ms reading.
  CHECK(first_s == doctest::Approx(0.530).epsilon(1e-6));
  REQUIRE(t.await(t.player.play(s, 1, {})).ok());
  CHECK(seconds(t.clock->now()) - first_s == doctest::Approx(0.020).epsilon(1e-6));
}

TEST_CASE("a bus relay never closes without the lease of what it joins") {
  Stage t;
  Setting s = powered({}, relays({0}));
  s.resources = 0;
  const auto record = t.await(t.player.play(s, 0, {}));
  REQUIRE_FALSE(record.ok());
  CHECK(record.error().kind == Error::Kind::internal);
  CHECK(t.bench.closed[1].none());
}

TEST_CASE("whichever call fails, the nest ends safe or the unconfirmed is named") {
  Setting driven = powered(relays({4}), relays({0, 1, 7}));
  driven.source.dc_V = 0.05;
  driven.resources = use_meter | use_source | use_detector;
  int total = 0;
  {
    Stage t;
    REQUIRE(t.await(t.player.play(driven, 0, {})).ok());
    CHECK(t.await(t.player.make_safe()).empty());
    total = t.bench.calls;
  }
  REQUIRE(total > 8);
  for (int n = 1; n <= total + 2; ++n) {
    CAPTURE(n);
    Stage t;
    t.bench.fail_at = n;
    const auto played = t.await(t.player.play(driven, 0, {}));
    const std::string unconfirmed = t.await(t.player.make_safe());
    const bool safe = t.bench.closed[1].none() && !t.bench.supply_state[1].on() && !t.bench.source_state.active();
    CHECK((safe || !unconfirmed.empty()));
    if (unconfirmed.empty()) CHECK(safe);
    CHECK(t.leases.held(1) == 0);
    (void)played;
  }
}

TEST_CASE("every action of the safe state is attempted though all of them fail") {
  Stage t;
  const Setting s = powered(relays({4}), relays({0}));
  REQUIRE(t.await(t.player.play(s, 0, {})).ok());
  t.bench.fail_from = 0;
  t.bench.log.clear();
  const std::string unconfirmed = t.await(t.player.make_safe());
  for (const char* what : {"source off", "supply off", "loads discharged", "relays open"})
    CHECK(unconfirmed.find(what) != std::string::npos);
  CHECK(position(t.bench.log, "source 0 V") < position(t.bench.log, "supply 0 V"));
  CHECK(position(t.bench.log, "11111111") < t.bench.log.size());
}

TEST_CASE("a load that keeps its charge is named, and the lid stays forbidden") {
  Stage t;
  const Setting s = powered(relays({4}), relays({0}));
  REQUIRE(t.await(t.player.play(s, 0, {})).ok());
  t.bench.charge_V = 4.7;
  const std::string unconfirmed = t.await(t.player.make_safe());
  CHECK(unconfirmed.find("still 4.7 V") != std::string::npos);
  CHECK(t.bench.closed[1].none());
}

TEST_CASE("a stop ends the setting under way, and the safe state is made all the same") {
  Stage t;
  Setting s = powered(relays({4}), relays({0}));
  s.settle_s = 100;
  t.bench.before_call = [&] {
    if (t.bench.log.back().find("supply 12") == std::string::npos) return;
    t.stop.set = true;
    t.stop.reason = "stopped at the station";
  };
  const auto played = t.await(t.player.play(s, 0, {}));
  REQUIRE_FALSE(played.ok());
  CHECK(played.error().what == "stopped at the station");
  CHECK(t.await(t.player.make_safe()).empty());
  CHECK_FALSE(t.bench.supply_state[1].on());
}
