// Plays settings in one nest: the only part of the flow that talks to instruments. Every wait has its deadline; every
// error is a value; make_safe() is called by the trial's supervisor on every path. One thread: the io_context's.
//
// Invariants, kept here for every relay command, whatever the plan says:
//  1  Break before make: the relays that leave a state have opened before those of the next one close.
//  2  A nest's bus relays (meter, source, detector) close only while the nest holds the lease of what they join.
//  3  Loads, ranges, source, short and supply relays never move while the source drives.
//  4  No power without a lid that has just read closed.
#pragma once
#include <functional>
#include <string>
#include <vector>

#include "fixtures/instruments.hpp"
#include "sequencer/leases.hpp"
#include "sequencer/observer.hpp"
#include "sequencer/transition.hpp"

namespace jigwright {

/// Set once by whoever ends all trials (Ctrl-C, lid, a lost shared instrument); read after every wait.
struct StopSignal {
  bool set{false};
  std::string reason;
};

class Player {
 public:
  using OnReading = std::function<void(const Setting&, const Reading&)>;
  Player(Bench& bench, Leases& leases, const SwitchingRules& rules, Person& person, const StopSignal& stop, int nest);

  /// Applies the setting, waits, reads as its stop rule says.
  /// Errors: of the instrument, late, person (stopped), each naming the setting.
  Task<Result<SettingRecord>> play(const Setting& setting, int index, const OnReading& on_reading);

  /// Source off, supply off, loads onto the bleed and measured, all relays of the nest open. Each action is attempted
  /// in order, under its own deadline, whatever the others did.
  /// @return what is unconfirmed, in words; empty = confirmed
  Task<std::string> make_safe();

  /// Gives the shared instruments back.
  void leave();

 private:
  Task<Result<Done>> apply(const Setting& setting);
  Task<Result<Done>> move(const Transition& t, const Setting& setting);
  Task<Result<Done>> join(const Setting& setting);
  Task<Result<Done>> set_source(const SourceState& state);
  Task<Result<Done>> set_supply(const SupplyState& state);
  Task<Result<Done>> open(const RelaySet& set);
  Task<Result<Done>> close(const RelaySet& set);
  Task<Result<Done>> wait(double for_s);
  Task<Result<Done>> check_lid();
  Task<Result<Reading>> read(const Setting& setting);
  Task<Result<Done>> discharge();
  Duration deadline(double allowed_s) const;
  Error stopped() const;

  Bench& bench_;
  Leases& leases_;
  const SwitchingRules& rules_;
  Person& person_;
  const StopSignal& stop_;
  int nest_;
  NestState state_;
  RelaySet loads_used_;
  Duration changed_{};  ///< when relays, source or supply last changed
  bool making_safe_{false};
};

}  // namespace jigwright
