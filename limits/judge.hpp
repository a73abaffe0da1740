// Judging: a finding against its limit, then all findings of a trial together. Pure; the same over fresh and stored
// findings. No path here leads from missing, over-range or doubtful data to GO.
#pragma once
#include <cstdint>
#include <span>
#include <string>
#include <vector>

#include "limits/limit.hpp"

namespace jigwright {

/// Stored; never renumbered.
enum class Verdict : std::uint8_t {
  met = 0,
  missed = 1,
  unsure = 2,       ///< the finding's own uncertainty (2u) exceeds the budget at its value: neither met nor missed
  no_evidence = 3,  ///< not read
  recorded = 4,     ///< no limit: recorded only
  invalid = 5,      ///< over range, never settled or no data, where the instrument is not proved right
};

enum class Judgement : std::uint8_t { go = 0, no_go = 1, void_ = 2 };
std::string_view word(Judgement judgement);  ///< "GO", "NO-GO", "VOID"
std::string_view word(Verdict verdict);      ///< "met", "missed", "unsure", "no evidence", "recorded", "invalid"

struct Judged {
  Finding finding;
  Verdict verdict{Verdict::no_evidence};
  double margin{std::numeric_limits<double>::quiet_NaN()};
};

/// One finding against its limit.
/// @param limit   nullptr = recorded only (but a state other than measured is still `invalid` or, proved, `missed`
///                only where a limit exists; without one it stays `recorded`)
/// @param proved  the instrument has just read a known value right: over range and never settling are then a miss
Judged judge(const Finding& finding, const Limit* limit, bool proved);

/// What ended a trial early, if anything did.
struct Ended {
  bool early{false};
  std::string reason;  ///< "the lid was opened", "no answer from the meter to READ?"
};

struct Outcome {
  Judgement judgement{Judgement::void_};
  int deciding{-1};         ///< index of the finding that decided, or -1
  std::string void_reason;  ///< in plain words, for VOID
};

/// GO: every limited metric of the depth met, and the trial ended by itself. NO-GO: any limit about the board missed,
/// whatever happened afterwards. VOID: everything else, with the reason: early end first, then the first missed limit
/// about the jig, then unsure, invalid, no evidence. A trial without any limited metric proves nothing: VOID.
/// @param metrics  the depth's full list; `judged[i].finding.metric` points into it. A limited metric without an entry
///                 counts as no evidence.
/// @param limited  for each metric whether it has a limit
Outcome judge_trial(std::span<const Metric> metrics, std::span<const bool> limited, std::span<const Judged> judged,
                    const Ended& ended);

}  // namespace jigwright
