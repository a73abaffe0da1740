#include "sequencer/recompute.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <bit>
#include <cmath>

#include "sequencer/evaluation.hpp"
#include "sequencer/raw_readings.hpp"

namespace jigwright {
namespace {

constexpr int at_once = 200;

Error cannot(std::string why) {
  return {Error::Kind::store, std::move(why), {}, {}};
}

/// NaN is NaN whatever its bits; the store keeps it as NULL.
bool same(double a, double b) {
  return std::isnan(a) ? std::isnan(b) : a == b;
}

bool same(const Judged& a, const Judged& b) {
  return same(a.finding.value, b.finding.value) && same(a.finding.u, b.finding.u) && a.finding.n == b.finding.n &&
         a.finding.state == b.finding.state && a.verdict == b.verdict;
}

std::string in_words(const Judged& j, Unit unit) {
  if (j.finding.state != FindingState::measured) return std::string(word(j.verdict));
  return fmt::format("{} ({})", format_quantity(j.finding.value, unit, 9), word(j.verdict));
}

/// Every setting that is always played has its record.
bool played_to_the_end(const ReadyPlan& plan, const Evaluation& evaluation) {
  std::vector<bool> played(plan.full.settings.size(), false);
  for (const SettingRecord& r : evaluation.records()) played[static_cast<std::size_t>(r.setting)] = true;
  for (std::size_t i = 0; i < played.size(); ++i)
    if (!played[i] && !plan.full.settings[i].only_if_doubtful) return false;
  return true;
}

/// The version of each kind's arithmetic in this program.
bool same_versions(const ReadyPlan& plan, const StoredTrial& trial) {
  return std::all_of(plan.plan.kinds.begin(), plan.plan.kinds.end(), [&](const StepKind* kind) {
    return std::any_of(trial.reduce_versions.begin(), trial.reduce_versions.end(),
                       [&](const auto& v) { return v.first == kind->name && v.second == kind->reduce_version; });
  });
}

/// A trial that something else than a finding ended carries that reason: its readings don't tell it.
Result<Evaluation> evaluate(const ReadyPlan& plan, const StoredTrial& trial, std::span<const StoredRecord> records) {
  auto evaluation = replay(plan, records, Ended{});
  if (!evaluation.ok() || evaluation.value().over() || played_to_the_end(plan, evaluation.value())) return evaluation;
  Ended early;
  early.early = true;
  early.reason = trial.void_reason;
  return replay(plan, records, early);
}

Disagreement compare(const std::vector<FindingRow>& rows, const StoredTrial& trial) {
  if (rows.size() != trial.findings.size())
    return {true, fmt::format("{} findings in the store, {} worked out again", trial.findings.size(), rows.size())};
  for (const FindingRow& row : rows) {
    const auto stored = std::find_if(trial.findings.begin(), trial.findings.end(),
                                     [&](const StoredFinding& f) { return f.name == row.metric.name; });
    if (stored == trial.findings.end()) return {true, label(row.metric.name) + " is not in the store"};
    if (!same(stored->judged, row.judged))
      return {true, fmt::format("{} is {} in the store, {} worked out again", label(row.metric.name),
                                in_words(stored->judged, row.metric.unit), in_words(row.judged, row.metric.unit))};
  }
  return {};
}

}  // namespace

Result<Disagreement> recompute(const ReadyPlan& plan, const StoredTrial& trial) {
  if (trial.readings_format == 0) return cannot("raw readings are not there any more");
  if (trial.readings_format != raw_readings_format)
    return cannot("raw readings of a layout that this program does not read");
  if (!same_versions(plan, trial)) return cannot("another version of a step's arithmetic");
  const auto records = decode_readings(trial.readings);
  if (!records.ok()) return Disagreement{true, records.error().what};
  const auto evaluation = evaluate(plan, trial, records.value());
  if (!evaluation.ok()) return Disagreement{true, evaluation.error().what};
  const Disagreement findings = compare(evaluation.value().rows(), trial);
  if (findings.differs) return findings;
  Judgement judgement = evaluation.value().outcome().judgement;
  if (judgement == Judgement::go && !trial.unsafe.empty()) judgement = Judgement::void_;
  if (judgement != trial.judgement)
    return Disagreement{true,
                        fmt::format("{} in the store, {} worked out again", word(trial.judgement), word(judgement))};
  return Disagreement{};
}

namespace {

/// Plans by set-up, read once each; nullptr where this program can't read one.
class Plans {
 public:
  explicit Plans(Database& database) : database_(database) {}

  Result<std::shared_ptr<const ReadyPlan>> of(std::int64_t setup) {
    if (const auto known = plans_.find(setup); known != plans_.end()) return known->second;
    const auto documents = documents_of_setup(database_, setup);
    if (!documents.ok()) return documents.error();
    PlanTexts texts;
    for (const Document& d : documents.value()) {
      const auto text = std::make_shared<const SourceText>(SourceText{d.name, d.text});
      if (d.kind == "plan") texts.plan = text;
      if (d.kind == "jig") texts.jig = text;
      if (d.kind == "limits") texts.limits = text;
    }
    Faults faults;
    std::shared_ptr<const ReadyPlan> plan;
    if (texts.plan && texts.jig && texts.limits) plan = read_plan_texts(texts, faults);
    plans_.emplace(setup, plan);
    return plan;
  }

 private:
  Database& database_;
  std::map<std::int64_t, std::shared_ptr<const ReadyPlan>> plans_;
};

void count(Recomputed& out, const StoredTrial& trial, const std::shared_ptr<const ReadyPlan>& plan) {
  if (!plan) {
    ++out.left_out["its plan, jig or limits are missing or not read by this program"];
    return;
  }
  const auto difference = recompute(*plan, trial);
  if (!difference.ok()) {
    ++out.left_out[difference.error().what];
  } else if (!difference.value().differs) {
    ++out.agree;
  } else {
    if (++out.differ == 1)
      out.first_difference = fmt::format("{}, trial {}: {}", trial.serial, trial.attempt, difference.value().what);
  }
}

}  // namespace

Result<Recomputed> recompute_all(Database& database, const std::function<void(std::int64_t)>& progress) {
  Recomputed out;
  Plans plans(database);
  std::int64_t after = 0, done = 0;
  for (;;) {
    const auto trials = stored_trials(database, after, at_once);
    if (!trials.ok()) return trials.error();
    if (trials.value().empty()) return out;
    for (const StoredTrial& trial : trials.value()) {
      const auto plan = plans.of(trial.setup);
      if (!plan.ok()) return plan.error();
      count(out, trial, plan.value());
    }
    after = trials.value().back().id;
    done += static_cast<std::int64_t>(trials.value().size());
    if (progress) progress(done);
  }
}

}  // namespace jigwright
