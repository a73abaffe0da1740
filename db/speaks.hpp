// Which of a board's trials speaks for it: the latest that counts. A GO after a NO-GO does not count until an engineer
// has reviewed that NO-GO; a VOID in between changes nothing about it. Pure; any thread.
#pragma once
#include <cstddef>
#include <optional>
#include <span>

#include "limits/judge.hpp"

namespace jigwright {

struct PastTrial {
  Judgement judgement{Judgement::void_};
  bool reviewed{false};  ///< of a NO-GO: an engineer let the board go on
};

/// @param trials  of one board, oldest first
/// @return index of the one that speaks; nullopt when there is none
std::optional<std::size_t> speaking_trial(std::span<const PastTrial> trials);

}  // namespace jigwright
