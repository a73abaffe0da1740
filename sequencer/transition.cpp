#include "sequencer/transition.hpp"

namespace jigwright {

SwitchingRules::SwitchingRules(const Jig& j) : jig(&j) {
  for (std::size_t i = 0; i < j.relays.size(); ++i) {
    switch (j.relays[i].role) {
      case Role::load:
        loads.set(i);
        cold.set(i);
        break;
      case Role::range:
      case Role::input_short:
      case Role::supply_to_board:
      case Role::bleed:
        cold.set(i);
        break;
      case Role::source_to_input:
      case Role::tone_to_output:
        cold.set(i);
        source.set(i);
        break;
      case Role::detector_to_output:
        detector.set(i);
        break;
      default:
        meter.set(i);
    }
  }
  bus = meter | source | detector;
}

std::uint32_t SwitchingRules::joined_by(const RelaySet& set) const {
  std::uint32_t resources = 0;
  if ((set & meter).any()) resources |= use_meter;
  if ((set & source).any()) resources |= use_source;
  if ((set & detector).any()) resources |= use_detector;
  return resources;
}

Transition transition(const NestState& from, const Setting& to, const SwitchingRules& rules) {
  const RelaySet target = to.own | to.bus;
  Transition t;
  t.opens = from.closed & ~target;
  t.closes = target & ~from.closed;
  t.quiet_source = from.source.active() && ((t.opens | t.closes) & rules.cold).any();
  if (from.supply != to.supply) {
    t.supply_down = from.supply.on();
    t.supply_up = to.supply.on();
  }
  const SourceState held = t.quiet_source ? SourceState{} : from.source;
  t.set_source = held != to.source;
  return t;
}

double transition_s(const Transition& t, const SwitchingRules& rules) {
  double total_s = 0;
  if (t.quiet_source) total_s += rules.jig->source.settle_s;
  if (t.supply_down) total_s += rules.jig->supply.settle_s;
  if (t.opens.any()) total_s += rules.jig->release_s(t.opens);
  if (t.closes.any()) total_s += rules.jig->operate_s(t.closes);
  if (t.supply_up) total_s += rules.jig->supply.settle_s;
  if (t.set_source) total_s += rules.jig->source.settle_s;
  return total_s;
}

int moves(const Transition& t) {
  return static_cast<int>(t.opens.count() + t.closes.count());
}

NestState after(const Setting& setting) {
  return {setting.own | setting.bus, setting.supply, setting.source};
}

}  // namespace jigwright
