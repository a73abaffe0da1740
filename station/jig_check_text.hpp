// The page of a jig's check. Pure; any thread.
#pragma once
#include <optional>
#include <string>
#include <vector>

#include "sequencer/jig_check.hpp"

namespace jigwright {

/// A part of the check: its plan, and what its trial came to; no trial = not tried.
struct CheckedPart {
  std::shared_ptr<const ReadyPlan> plan;
  std::optional<TrialEnd> end;
  PartSays says;
};

/// A line a part, below it a line a metric: of its variants the one with the least room (every one that is missed),
/// with value and limit; then what nothing tells, and one word.
std::string render(const std::vector<CheckedPart>& parts, const std::vector<std::string>& untold);

/// ok, failed or in doubt of them all: failed before in doubt, and a part not tried is in doubt.
PartVerdict verdict_of(const std::vector<CheckedPart>& parts);

}  // namespace jigwright
