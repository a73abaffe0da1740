#include "steps/kinds.hpp"

#include <array>

namespace jigwright {
namespace {

constexpr std::array<StepKind, 13> table{{
    {"known-value", 1, "reads the meter's own zero and the jig's reference", read_known_value},
    {"contact", 1, "loop resistance of each probe's force and sense pin, before power", read_contact},
    {"identity", 1, "tells the product by a known resistor or voltage on its identity pad", read_identity},
    {"power-up", 1, "rails against shorts, then power on with limited current, rails at the pads", read_power_up},
    {"supply-current", 1, "current from both supplies, by their read-back", read_supply_current},
    {"offset", 1, "output with the input shorted, less the zero of the path", read_offset},
    {"gain", 1, "slope of output on input at levels of both polarities", read_gain},
    {"offset-under-load", 1, "output and its alternating part under every load, against open", read_offset_under_load},
    {"question", 1, "a question to the operator: yes or no, or a value", read_question},
    {"relay-check", 1, "each relay both ways: the reading that it switches changes", read_relay_check},
    {"path-zero", 1, "the meter's zero over every path to a copper short, in both polarities", read_path_zero},
    {"source-check", 1, "the source against the meter at levels of both signs", read_source_check},
    {"load-check", 1, "each load at the board's pad: capacitance, series resistance, leakage, its relay",
     read_load_check},
}};

}  // namespace

std::span<const StepKind> step_kinds() {
  return table;
}

const StepKind* step_kind(std::string_view name) {
  for (const StepKind& kind : table)
    if (kind.name == name) return &kind;
  return nullptr;
}

}  // namespace jigwright
