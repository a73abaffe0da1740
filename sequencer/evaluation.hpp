// What a trial's records say: findings, their verdicts, and whether anything more may be played. Pure: the trial feeds
// it as it plays, a replay feeds it from stored readings, and both must come to the same. The plan outlives it. One
// thread.
#pragma once
#include <span>
#include <string>
#include <vector>

#include "db/trial_record.hpp"
#include "limits/judge.hpp"
#include "sequencer/plan.hpp"
#include "sequencer/raw_readings.hpp"
#include "steps/setting.hpp"

namespace jigwright {

class Evaluation {
 public:
  explicit Evaluation(const ReadyPlan& plan);

  /// Records in the order played. A known value, read because a step was in doubt, is judged at once.
  void add(SettingRecord record);
  /// At the end of a step's settings of one phase, or when the trial ends in their midst: reduces all of the step's
  /// records so far and judges what is new.
  void reduce(int step);
  /// Something else than a finding ends the trial: the first reason stands.
  void end(std::string reason);

  /// Nothing more may be played.
  bool over() const { return over_; }
  /// A record since the last reduce() overloaded or never settled.
  bool doubtful() const;
  /// Without power, whatever is missed, invalid or unsure forbids power. Empty = allowed; else the metric, in words.
  std::string power_forbidden_by() const;

  const std::vector<SettingRecord>& records() const { return records_; }
  const std::vector<Judged>& judged() const { return judged_; }
  /// Known values read in doubt, as findings of their steps.
  const std::vector<FindingRow>& known_values() const { return known_values_; }

  /// `deciding` is the place of its metric in rows().
  Outcome outcome() const;
  /// Every metric of the plan in its order, read or not; then the known values.
  std::vector<FindingRow> rows() const;

 private:
  void judge_known_value(const SettingRecord& record);
  void consider(const Judged& judged);

  const ReadyPlan& plan_;
  std::vector<SettingRecord> records_;
  std::vector<SettingRecord> own_;  ///< of the step being reduced
  std::vector<Judged> judged_;
  std::vector<FindingRow> known_values_;
  std::vector<bool> found_;
  std::size_t first_of_block_{0};
  bool proved_{false};  ///< a known value of this block was read right
  bool powered_{false};
  bool over_{false};
  Ended ended_;
};

/// The same evaluation over readings from the store.
/// @param ended  what else than a finding had ended the trial
/// Error kind store when a record has no setting in this plan: it is not the plan that was played.
Result<Evaluation> replay(const ReadyPlan& plan, std::span<const StoredRecord> stored, const Ended& ended);

}  // namespace jigwright
