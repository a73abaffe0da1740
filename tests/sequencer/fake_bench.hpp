// A bench of fakes for the sequencer's tests: every call is logged, and any call can be made to fail by its number.
#pragma once
#include <fmt/format.h>

#include <functional>
#include <string>
#include <vector>

#include "fixtures/instruments.hpp"
#include "fixtures/jig.hpp"

namespace jigwright::test {

struct FakeBench : Bench {
  explicit FakeBench(Clock& c) : clock_(c) {}

  Clock& clock_;
  std::vector<std::string> log;
  int calls{0};
  int fail_at{-1};         ///< this call (from 1) answers with an Error
  int fail_from{1 << 30};  ///< and every call from this one on
  bool lid_is_closed{true};
  RelaySet closed[16];
  SupplyState supply_state[16];
  SourceState source_state;
  double charge_V{0};  ///< what the meter reads of the OUT line
  std::function<Reading(const MeterSetup&)> meter_says;
  std::function<void()> before_call;

  Result<Done> note(const std::string& what) {
    ++calls;
    log.push_back(what);
    if (before_call) before_call();
    if (calls == fail_at || calls >= fail_from) return Error{Error::Kind::instrument, "refused", what, {}};
    return Done{};
  }

  struct M : Meter {
    FakeBench& b;
    explicit M(FakeBench& bench) : b(bench) {}
    Task<Result<Identity>> identify(Duration) override { co_return b.who("meter"); }
    Task<Result<Reading>> read(const MeterSetup& setup, Duration) override {
      const auto done = b.note("meter read");
      if (!done.ok()) co_return done.error();
      const Duration began = b.clock_.now();
      co_await b.clock_.sleep_until(began + from_seconds(setup.integration_s));
      Reading r;
      if (b.meter_says) {
        r = b.meter_says(setup);
      } else {
        r.value = b.charge_V;
        r.state = ReadingState::ok;
      }
      r.at = began + (b.clock_.now() - began) / 2;
      co_return r;
    }
  } meter_{*this};

  struct R : RelayUnit {
    FakeBench& b;
    explicit R(FakeBench& bench) : b(bench) {}
    Task<Result<Identity>> identify(Duration) override { co_return b.who("relays"); }
    Task<Result<Done>> close(int nest, const RelaySet& set, Duration) override {
      const auto done = b.note(fmt::format("nest {} close {}", nest, set.to_string().substr(108)));
      if (done.ok()) b.closed[nest] |= set;
      co_return done;
    }
    Task<Result<Done>> open(int nest, const RelaySet& set, Duration) override {
      const auto done = b.note(fmt::format("nest {} open {}", nest, set.to_string().substr(108)));
      if (done.ok()) b.closed[nest] &= ~set;
      co_return done;
    }
  } relays_{*this};

  struct So : Source {
    FakeBench& b;
    explicit So(FakeBench& bench) : b(bench) {}
    Task<Result<Identity>> identify(Duration) override { co_return b.who("source"); }
    Task<Result<Done>> set(const SourceState& state, Duration) override {
      const auto done = b.note(fmt::format("source {} V", state.dc_V));
      if (done.ok()) b.source_state = state;
      co_return done;
    }
  } source_{*this};

  struct Su : Supply {
    FakeBench& b;
    explicit Su(FakeBench& bench) : b(bench) {}
    Task<Result<Identity>> identify(Duration) override { co_return b.who("supply"); }
    Task<Result<Done>> set(int nest, const SupplyState& state, Duration) override {
      const auto done = b.note(fmt::format("nest {} supply {} V", nest, state.rail_V));
      if (done.ok()) b.supply_state[nest] = state;
      co_return done;
    }
    Task<Result<Reading>> read(int, SupplyQuantity, Duration) override {
      const auto done = b.note("supply read");
      if (!done.ok()) co_return done.error();
      Reading r;
      r.value = 0.006;
      r.state = ReadingState::ok;
      r.at = b.clock_.now();
      co_return r;
    }
  } supply_{*this};

  struct D : Detector {
    FakeBench& b;
    explicit D(FakeBench& bench) : b(bench) {}
    Task<Result<Identity>> identify(Duration) override { co_return b.who("detector"); }
    Task<Result<Reading>> read(double, Duration) override {
      const auto done = b.note("detector read");
      if (!done.ok()) co_return done.error();
      Reading r;
      r.state = ReadingState::ok;
      co_return r;
    }
  } detector_{*this};

  struct L : Lid {
    FakeBench& b;
    explicit L(FakeBench& bench) : b(bench) {}
    Task<Result<Identity>> identify(Duration) override { co_return b.who("lid"); }
    Task<Result<bool>> closed(Duration) override {
      const auto done = b.note("lid read");
      if (!done.ok()) co_return done.error();
      co_return b.lid_is_closed;
    }
  } lid_{*this};

  Identity who(std::string name) const {
    Identity id;
    id.instrument = std::move(name);
    id.maker = "fake";
    id.simulated = true;
    return id;
  }
  Clock& clock() override { return clock_; }
  Meter& meter() override { return meter_; }
  RelayUnit& relays() override { return relays_; }
  Source& source() override { return source_; }
  Supply& supply() override { return supply_; }
  Detector& detector() override { return detector_; }
  Lid& lid() override { return lid_; }
  Result<Done> board_placed(int, const std::string&, int) override { return Done{}; }
};

/// Eight relays: K0 meter to output, K1 source to input, K2 input short, K3 supply, K4 and K5 loads, K6 bleed, K7
/// detector.
inline Jig small_jig() {
  Jig jig;
  jig.name = "small";
  const Role roles[] = {
      Role::meter_to_output, Role::source_to_input,   Role::input_short, Role::supply_to_board, Role::load, Role::load,
      Role::bleed,           Role::detector_to_output};
  for (std::size_t i = 0; i < 8; ++i) {
    Relay r;
    r.id = "K" + std::to_string(i);
    r.role = roles[i];
    if (i == 4) r.of = "1 nF";
    if (i == 5) r.of = "10 nF";
    r.channel = static_cast<std::int64_t>(i);
    r.operate_s = 0.005;
    r.release_s = 0.004;
    jig.relays.push_back(r);
  }
  Load load;
  load.id = "1 nF";
  load.capacitance_F = 1e-9;
  jig.loads.push_back(load);
  load.id = "10 nF";
  load.capacitance_F = 1e-8;
  jig.loads.push_back(load);
  Accuracy range;
  range.range = 10;
  jig.meter.voltage.push_back(range);
  jig.supply.max_V = 15;
  jig.supply.settle_s = 0.005;
  jig.source.settle_s = 0.001;
  jig.discharged_V = 0.05;
  return jig;
}

inline RelaySet relays(std::initializer_list<std::size_t> set) {
  RelaySet out;
  for (const std::size_t i : set) out.set(i);
  return out;
}

}  // namespace jigwright::test
