// Where the sequencer leaves its trials: two calls, each one durable transaction. The store implements it; tests pass
// a fake. One thread.
#pragma once
#include <cstdint>

#include "db/trial_record.hpp"
#include "db/uuid.hpp"

namespace jigwright {

/// What begin_trial() hands out and finish_trial() takes back.
struct OpenTrial {
  std::int64_t id{};  ///< inside the store only
  Uuid uuid{};
  int attempt{1};                       ///< trials of the board so far, this one counted
  std::optional<std::int64_t> adopted;  ///< as TrialStart's
};

class TrialLog {
 public:
  virtual ~TrialLog() = default;

  /// Writes the trial as an open VOID ("the program ended in mid-trial"), durable at return: whatever happens next, it
  /// shows. Error kind store: can't write; or the store holds trials of the other origin (simulated, measured).
  virtual Result<OpenTrial> begin_trial(const TrialStart& start) = 0;

  /// Turns the open trial into its ended record with all findings and readings, durable at return. On an error nothing
  /// of it stands and the trial remains an open VOID; GO must then not be shown.
  virtual Result<Done> finish_trial(const OpenTrial& open, const TrialEnd& end) = 0;

  /// What can wait until a trial's end was told: called after it, before the next begin. Nothing that fails in it
  /// touches a trial.
  virtual void upkeep() {}
};

}  // namespace jigwright
