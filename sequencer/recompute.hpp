// Works stored trials out again: plan, jig and limits from the texts that stand with them, findings and judgement from
// their raw readings, and compares every number to the last bit. Reads the store only; one thread.
#pragma once
#include <cstdint>
#include <functional>
#include <map>
#include <memory>
#include <string>

#include "db/stored_trials.hpp"
#include "sequencer/plan.hpp"

namespace jigwright {

/// What is wrong with one trial, or nothing.
struct Disagreement {
  bool differs{false};
  std::string what;  ///< "offset: offset (x100) is 0.11 mV in the store, 0.12 mV worked out again"
};

/// Pure. Error kind store when it can't be worked out again: readings gone or damaged, another version of a step's
/// arithmetic, a plan that this program no longer reads; the reason is then counted, not a difference.
Result<Disagreement> recompute(const ReadyPlan& plan, const StoredTrial& trial);

struct Recomputed {
  std::int64_t agree{};
  std::int64_t differ{};
  std::string first_difference;                  ///< with the serial and the attempt
  std::map<std::string, std::int64_t> left_out;  ///< reason -> trials that can't be worked out again
};

/// All ended trials of the store, oldest first. `progress` is told how many are done.
/// Error kind store when the store can't be read.
Result<Recomputed> recompute_all(Database& database, const std::function<void(std::int64_t)>& progress);

}  // namespace jigwright
