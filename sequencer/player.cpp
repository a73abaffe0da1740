#include "sequencer/player.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace jigwright {
namespace {

constexpr SourceState source_off{};
constexpr SupplyState supply_off{};

/// Longest time that an instrument may take over a command, beyond the physical time of what it does.
constexpr double command_allowance_s = 1.0;
constexpr double discharge_allowance_s = 3.0;
constexpr double answer_allowance_s = 600.0;

Error in_setting(Error error, const Setting& setting) {
  error.where += (error.where.empty() ? "" : ", ") + fmt::format("setting \"{}\"", setting.id);
  return error;
}

}  // namespace

Player::Player(Bench& bench, Leases& leases, const SwitchingRules& rules, Person& person, const StopSignal& stop,
               int nest)
    : bench_(bench), leases_(leases), rules_(rules), person_(person), stop_(stop), nest_(nest) {}

Duration Player::deadline(double allowed_s) const {
  return bench_.clock().now() + from_seconds(allowed_s + command_allowance_s);
}

Error Player::stopped() const {
  return {Error::Kind::person, stop_.reason.empty() ? "stopped" : stop_.reason, {}, {}};
}

Task<Result<Done>> Player::wait(double for_s) {
  if (for_s > 0) co_await bench_.clock().sleep_until(bench_.clock().now() + from_seconds(for_s));
  if (stop_.set && !making_safe_) co_return stopped();
  co_return Done{};
}

Task<Result<Done>> Player::set_source(const SourceState& state) {
  const auto set = co_await bench_.source().set(state, deadline(rules_.jig->source.settle_s));
  if (!set.ok()) co_return set.error();
  state_.source = state;
  const auto waited = co_await wait(rules_.jig->source.settle_s);
  changed_ = bench_.clock().now();
  co_return waited;
}

Task<Result<Done>> Player::set_supply(const SupplyState& state) {
  const auto set = co_await bench_.supply().set(nest_, state, deadline(rules_.jig->supply.settle_s));
  if (!set.ok()) co_return set.error();
  state_.supply = state;
  const auto waited = co_await wait(rules_.jig->supply.settle_s);
  changed_ = bench_.clock().now();
  co_return waited;
}

Task<Result<Done>> Player::open(const RelaySet& set) {
  const auto opened = co_await bench_.relays().open(nest_, set, deadline(0));
  if (!opened.ok()) co_return opened.error();
  state_.closed &= ~set;
  const auto waited = co_await wait(rules_.jig->release_s(set));
  changed_ = bench_.clock().now();
  co_return waited;
}

Task<Result<Done>> Player::close(const RelaySet& set) {
  // Invariant 2.
  if ((rules_.joined_by(set) & ~leases_.held(nest_)) != 0)
    co_return Error{Error::Kind::internal, "a relay would join the nest to an instrument that it has no lease of",
                    fmt::format("nest {}", nest_), "report this plan and jig to the engineer"};
  // Known as closed even if the command's answer is lost, so that make_safe() opens it.
  state_.closed |= set;
  loads_used_ |= set & rules_.loads;
  const auto closed = co_await bench_.relays().close(nest_, set, deadline(0));
  if (!closed.ok()) co_return closed.error();
  const auto waited = co_await wait(rules_.jig->operate_s(set));
  changed_ = bench_.clock().now();
  co_return waited;
}

Task<Result<Done>> Player::check_lid() {
  const auto closed = co_await bench_.lid().closed(deadline(0));
  if (!closed.ok()) co_return closed.error();
  if (closed.value()) co_return Done{};
  co_return Error{Error::Kind::person, "the lid is open", {}, "close the lid and try the board again"};
}

/// Gets the lease of what the setting shares; gives up first what another nest waits for.
Task<Result<Done>> Player::join(const Setting& setting) {
  const std::uint32_t held = leases_.held(nest_);
  const bool enough = (setting.resources & ~held) == 0;
  if (held != 0 && (!enough || leases_.wanted(nest_))) {
    if (state_.source.active()) {
      const auto quiet = co_await set_source(source_off);
      if (!quiet.ok()) co_return quiet;
    }
    const RelaySet joined = state_.closed & rules_.bus;
    if (joined.any()) {
      const auto opened = co_await open(joined);
      if (!opened.ok()) co_return opened;
    }
    leases_.release(nest_);
  }
  const bool got = co_await leases_.acquire(nest_, setting.resources);
  if (!got) co_return stopped();
  co_return Done{};
}

Task<Result<Done>> Player::move(const Transition& t, const Setting& setting) {
  if (t.quiet_source) {
    const auto done = co_await set_source(source_off);
    if (!done.ok()) co_return done;
  }
  if (t.supply_down) {
    const auto done = co_await set_supply(supply_off);
    if (!done.ok()) co_return done;
  }
  if (t.opens.any()) {
    const auto done = co_await open(t.opens);
    if (!done.ok()) co_return done;
  }
  if (t.closes.any()) {
    const auto done = co_await close(t.closes);
    if (!done.ok()) co_return done;
  }
  if (t.supply_up) {
    const auto done = co_await set_supply(setting.supply);
    if (!done.ok()) co_return done;
  }
  if (t.set_source) {
    const auto done = co_await set_source(setting.source);
    if (!done.ok()) co_return done;
  }
  co_return Done{};
}

Task<Result<Done>> Player::apply(const Setting& setting) {
  if (setting.needs_lid || setting.supply.on()) {
    const auto lid = co_await check_lid();
    if (!lid.ok()) co_return lid;
  }
  const auto joined = co_await join(setting);
  if (!joined.ok()) co_return joined;
  const Transition t = transition(state_, setting, rules_);
  if (t.any()) {
    const auto moved = co_await move(t, setting);
    if (!moved.ok()) co_return moved;
  }
  const Duration settled = changed_ + from_seconds(setting.settle_s);
  if (settled > bench_.clock().now()) co_await bench_.clock().sleep_until(settled);
  if (stop_.set) co_return stopped();
  co_return Done{};
}

Task<Result<Reading>> Player::read(const Setting& setting) {
  if (const auto* meter = std::get_if<ReadMeter>(&setting.act)) {
    const double takes_s = meter->setup.integration_s + rules_.jig->meter.reading_overhead_s;
    co_return co_await bench_.meter().read(meter->setup, deadline(takes_s));
  }
  if (const auto* detector = std::get_if<ReadDetector>(&setting.act))
    co_return co_await bench_.detector().read(detector->dwell_s, deadline(detector->dwell_s));
  if (const auto* supply = std::get_if<ReadSupply>(&setting.act))
    co_return co_await bench_.supply().read(nest_, supply->quantity, deadline(0));
  if (const auto* question = std::get_if<Ask>(&setting.act))
    co_return co_await person_.ask(nest_, *question, deadline(answer_allowance_s));
  Reading nothing;
  nothing.value = 0;
  nothing.at = bench_.clock().now();
  nothing.state = ReadingState::ok;
  co_return nothing;
}

Task<Result<SettingRecord>> Player::play(const Setting& setting, int index, const OnReading& on_reading) {
  SettingRecord record;
  record.setting = index;
  record.started = bench_.clock().now();
  const auto applied = co_await apply(setting);
  if (stop_.set) co_return in_setting(stopped(), setting);
  if (!applied.ok()) co_return in_setting(applied.error(), setting);
  record.readings.reserve(std::holds_alternative<Fixed>(setting.stop)
                              ? static_cast<std::size_t>(std::get<Fixed>(setting.stop).n)
                              : std::size_t{8});
  Next next = Next::more;
  while (next == Next::more) {
    const auto got = co_await read(setting);
    if (stop_.set) co_return in_setting(stopped(), setting);
    if (!got.ok()) co_return in_setting(got.error(), setting);
    record.readings.push_back(got.value());
    if (on_reading) on_reading(setting, got.value());
    next = decide(setting.stop, record.readings);
  }
  record.ended = next;
  co_return record;
}

/// All loads that were used go onto the bus together with the bleed: a charge left on any of them shows in the reading.
Task<Result<Done>> Player::discharge() {
  const Jig& jig = *rules_.jig;
  const auto fail = [](std::string what) {
    return Error{
        Error::Kind::instrument, "discharge of the loads not measured: " + std::move(what), {}, "keep the lid closed"};
  };
  const RelaySet bleed = jig.relays_of(Role::bleed);
  const RelaySet meter = jig.relays_of(Role::meter_to_output);
  if (bleed.none() || meter.none()) co_return fail("the jig has no bleed or no meter path to the output");
  const bool got = co_await leases_.acquire(nest_, use_meter);
  if (!got) co_return fail("the meter is not free");
  const RelaySet target = loads_used_ | bleed | meter;
  const RelaySet leaving = state_.closed & ~target;
  if (leaving.any()) {
    const auto opened = co_await open(leaving);
    if (!opened.ok()) co_return fail(opened.error().what);
  }
  const auto closed = co_await close(target & ~state_.closed);
  if (!closed.ok()) co_return fail(closed.error().what);
  MeterSetup setup;
  setup.range = jig.voltage_range(jig.supply.max_V).range;
  setup.integration_s = jig.plc_s();
  const Duration until = bench_.clock().now() + from_seconds(discharge_allowance_s);
  for (;;) {
    const auto reading = co_await bench_.meter().read(setup, deadline(setup.integration_s));
    if (!reading.ok()) co_return fail(reading.error().what);
    if (reading.value().state == ReadingState::ok && std::abs(reading.value().value) < jig.discharged_V)
      co_return Done{};
    if (bench_.clock().now() > until)
      co_return fail(reading.value().state == ReadingState::ok
                         ? fmt::format("still {}", format_quantity(reading.value().value, Unit::volt, 3))
                         : "the meter is over range");
  }
}

Task<std::string> Player::make_safe() {
  making_safe_ = true;
  std::string unconfirmed;
  const auto note = [&](const Result<Done>& done, std::string_view what) {
    if (done.ok()) return;
    if (!unconfirmed.empty()) unconfirmed += "; ";
    unconfirmed += fmt::format("{} ({})", what, describe(done.error()));
  };
  if ((leases_.held(nest_) & use_source) != 0 || leases_.free(use_source)) {
    const auto source = co_await set_source(source_off);
    note(source, "source off");
  }
  const auto supply = co_await set_supply(supply_off);
  note(supply, "supply off");
  if (loads_used_.any()) {
    const auto empty = co_await discharge();
    note(empty, "loads discharged");
  }
  RelaySet all;
  for (std::size_t i = 0; i < rules_.jig->relays.size(); ++i) all.set(i);
  const auto opened = co_await open(all);
  note(opened, "relays open");
  if (opened.ok()) loads_used_.reset();
  leases_.release(nest_);
  making_safe_ = false;
  co_return unconfirmed;
}

void Player::leave() {
  leases_.release(nest_);
}

}  // namespace jigwright
