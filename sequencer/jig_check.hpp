// The jig's check: the plans that prove a jig, one thing in the nest after another, and what their trials say of it.
// Reading does file input; the rest is pure.
#pragma once
#include <memory>
#include <string>
#include <vector>

#include "db/trial_record.hpp"
#include "sequencer/plan.hpp"

namespace jigwright {

using CheckPlans = std::vector<std::shared_ptr<const ReadyPlan>>;

/// The first plan and those that `next` names, in order. A plan without [jig_check], one named twice, a serial or an id
/// that two parts share, or another jig than the first one's is a fault. Empty when a fault was added.
CheckPlans read_check_plans(const std::string& first_path, Faults& faults);

enum class PartVerdict : std::uint8_t {
  met,       ///< GO; of a reject sample NO-GO, at its load and nowhere else
  failed,    ///< a limit missed, or the reject sample was not found as it must be
  in_doubt,  ///< nothing missed, but jig, instrument or person ended the trial
};

struct PartSays {
  PartVerdict verdict{PartVerdict::in_doubt};
  std::string why;  ///< empty when met: the first findings that are missed, or what else ended it
};

/// @param recorded  only a recorded trial proves anything
PartSays judge_part(const JigCheckPart& part, const TrialEnd& end, bool recorded);

/// What no finding of any part tells, and no check passes: relays ("K22, supply to board"), and loads whose series
/// resistance their reactance hides.
std::vector<std::string> untold(const CheckPlans& plans);

}  // namespace jigwright
