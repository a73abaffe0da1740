// The order in which settings are played: pure. Phases and the plan's order of steps stand; inside a step's group the
// settings are put so that relays take the least time, then move the least. Not a timetable: at each free moment the
// player asks pick() which waiting nest gets the shared instruments.
#pragma once
#include <cstdint>
#include <optional>
#include <span>
#include <vector>

#include "sequencer/transition.hpp"

namespace jigwright {

/// Settings by phase, then step, then group; inside a group nearest neighbour first from the state before it, and never
/// worse than the order given. Group -1 keeps its place and is a barrier itself.
std::vector<Setting> arrange(std::vector<Setting> settings, const SwitchingRules& rules);

struct Waiting {
  int nest{};
  std::uint32_t resources{};
  std::uint64_t order{};  ///< of asking
};
/// The longest waiting nest whose instruments are all free; nothing younger overtakes it for an instrument that it
/// needs.
std::optional<std::size_t> pick(std::span<const Waiting> waiting, std::uint32_t busy);

}  // namespace jigwright
