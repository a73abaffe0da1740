// From one state of a nest to the next setting: which relays move and in what order source and supply follow. Pure; the
// player carries it out, arrange() and lint price it, so that all three agree. Any thread.
#pragma once
#include "fixtures/jig.hpp"
#include "steps/setting.hpp"

namespace jigwright {

/// What a nest is known to be in.
struct NestState {
  RelaySet closed;
  SupplyState supply;
  SourceState source;
};

/// In this order: source to 0 V, supply down, open, close (break before make), supply up, source to its new value.
struct Transition {
  bool quiet_source{false};  ///< relays that must not switch under drive are about to move
  bool supply_down{false};
  RelaySet opens;
  RelaySet closes;
  bool supply_up{false};
  bool set_source{false};
  bool any() const { return supply_down || supply_up || set_source || quiet_source || opens.any() || closes.any(); }
};

/// Facts of the jig that transitions need, made once.
struct SwitchingRules {
  explicit SwitchingRules(const Jig& jig);
  RelaySet cold;  ///< never moved while the source drives: loads, ranges, source, short, supply, bleed
  RelaySet bus;   ///< join the nest to shared instruments
  RelaySet loads;
  RelaySet meter, source, detector;  ///< the parts of bus by the instrument they join
  /// Instruments (Resource bits) that these relays join the nest to.
  std::uint32_t joined_by(const RelaySet& set) const;
  const Jig* jig;
};

Transition transition(const NestState& from, const Setting& to, const SwitchingRules& rules);

/// Time the relays and instruments take, without the setting's own settling.
double transition_s(const Transition& t, const SwitchingRules& rules);
/// Relay moves (each open or close of one relay).
int moves(const Transition& t);
NestState after(const Setting& setting);

}  // namespace jigwright
