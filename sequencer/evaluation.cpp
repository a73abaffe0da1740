#include "sequencer/evaluation.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <memory>

namespace jigwright {
namespace {

bool bad(Verdict v) {
  return v == Verdict::missed || v == Verdict::invalid || v == Verdict::unsure;
}

bool all_ok(const SettingRecord& record) {
  return !record.readings.empty() && record.ended == Next::enough &&
         std::all_of(record.readings.begin(), record.readings.end(),
                     [](const Reading& r) { return r.state == ReadingState::ok; });
}

/// What the jig's reference may read: the meter's accuracy there and the reference's own uncertainty (k = 2).
double reference_bound_V(const Jig& jig, const MeterSetup& setup) {
  const Accuracy& range = jig.accuracy(setup);
  return range.of_reading * std::abs(jig.reference_V) + range.of_range * range.range + 2 * jig.reference_u_V;
}

Limit reference_limit(double reference_V, double bound_V) {
  Limit limit;
  limit.specification = {reference_V - bound_V, reference_V + bound_V};
  limit.applied = limit.specification;
  limit.nominal = reference_V;
  limit.guard = Guard::none;
  limit.reason = "the meter's accuracy and the reference's uncertainty";
  return limit;
}

Finding known_value(const SettingRecord& record, double bound_V) {
  Finding finding;
  finding.n = static_cast<int>(record.readings.size());
  if (!all_ok(record)) return finding;
  double sum = 0;
  for (const Reading& r : record.readings) sum += r.value;
  finding.value = sum / finding.n;
  finding.u = bound_V / std::sqrt(3.0);
  finding.state = FindingState::measured;
  return finding;
}

}  // namespace

Evaluation::Evaluation(const ReadyPlan& plan) : plan_(plan) {
  records_.reserve(plan.full.settings.size());
  judged_.reserve(plan.full.metrics.size());
  found_.resize(plan.full.metrics.size(), false);
}

void Evaluation::end(std::string reason) {
  over_ = true;
  if (ended_.early) return;
  ended_.early = true;
  ended_.reason = std::move(reason);
}

void Evaluation::add(SettingRecord record) {
  const Setting& setting = plan_.full.settings[static_cast<std::size_t>(record.setting)];
  powered_ = powered_ || setting.phase == Phase::powered;
  if (setting.only_if_doubtful) judge_known_value(record);
  records_.push_back(std::move(record));
}

bool Evaluation::doubtful() const {
  return std::any_of(
      records_.begin() + static_cast<std::ptrdiff_t>(first_of_block_), records_.end(), [](const SettingRecord& r) {
        return r.ended == Next::gave_up || std::any_of(r.readings.begin(), r.readings.end(),
                                                       [](const Reading& x) { return x.state != ReadingState::ok; });
      });
}

void Evaluation::judge_known_value(const SettingRecord& record) {
  const Setting& setting = plan_.full.settings[static_cast<std::size_t>(record.setting)];
  const double bound_V = reference_bound_V(*plan_.jig, std::get<ReadMeter>(setting.act).setup);
  FindingRow row;
  row.metric.name = {plan_.plan.steps[static_cast<std::size_t>(setting.step)]->id, "known_value",
                     setting.phase == Phase::powered ? "with power" : "without power"};
  row.metric.unit = Unit::volt;
  row.metric.about = About::jig;
  row.limit = reference_limit(plan_.jig->reference_V, bound_V);
  row.judged = judge(known_value(record, bound_V), &*row.limit, false);
  proved_ = row.judged.verdict == Verdict::met;
  if (!proved_) end("the meter does not read its own known value right");
  known_values_.push_back(std::move(row));
}

void Evaluation::reduce(int step) {
  own_.clear();
  for (const SettingRecord& r : records_) {
    const Setting& s = plan_.full.settings[static_cast<std::size_t>(r.setting)];
    if (s.step == step && s.position >= 0) own_.push_back(r);
  }
  const int base = plan_.full.first_metric[static_cast<std::size_t>(step)];
  const Step& of = *plan_.plan.steps[static_cast<std::size_t>(step)];
  for (Finding& finding : of.reduce(Depth::full, own_, plan_.full.settings)) {
    finding.metric += base;
    const auto at = static_cast<std::size_t>(finding.metric);
    if (found_[at]) continue;
    found_[at] = true;
    const std::optional<Limit>& limit = plan_.full.limits[at];
    judged_.push_back(judge(finding, limit ? &*limit : nullptr, proved_));
    consider(judged_.back());
  }
  first_of_block_ = records_.size();
  proved_ = false;
}

void Evaluation::consider(const Judged& j) {
  if (!bad(j.verdict)) return;
  if (plan_.full.metrics[static_cast<std::size_t>(j.finding.metric)].about == About::jig)
    over_ = true;  // the judgement names the finding
  else if (plan_.plan.stop_at_first_miss && j.verdict == Verdict::missed)
    end("stopped at the first miss, as the plan says");
}

std::string Evaluation::power_forbidden_by() const {
  if (powered_) return {};
  for (const Judged& j : judged_)
    if (bad(j.verdict)) return label(plan_.full.metrics[static_cast<std::size_t>(j.finding.metric)].name);
  return {};
}

Outcome Evaluation::outcome() const {
  const std::size_t n = plan_.full.limits.size();
  const std::unique_ptr<bool[]> limited(new bool[n]);
  for (std::size_t i = 0; i < n; ++i) limited[i] = plan_.full.limits[i].has_value();
  Outcome outcome = judge_trial(plan_.full.metrics, {limited.get(), n}, judged_, ended_);
  if (outcome.deciding >= 0) outcome.deciding = judged_[static_cast<std::size_t>(outcome.deciding)].finding.metric;
  return outcome;
}

std::vector<FindingRow> Evaluation::rows() const {
  const Expanded& full = plan_.full;
  std::vector<const Judged*> of(full.metrics.size(), nullptr);
  for (const Judged& j : judged_) of[static_cast<std::size_t>(j.finding.metric)] = &j;
  std::vector<FindingRow> rows;
  rows.reserve(full.metrics.size() + known_values_.size());
  for (std::size_t i = 0; i < full.metrics.size(); ++i) {
    FindingRow row{full.metrics[i], full.limits[i], {}};
    row.judged.finding.metric = static_cast<int>(i);
    row.judged.finding.state = FindingState::skipped;
    if (of[i] != nullptr) row.judged = *of[i];
    rows.push_back(std::move(row));
  }
  rows.insert(rows.end(), known_values_.begin(), known_values_.end());
  return rows;
}

namespace {

/// The setting that a stored record was played as; -1 when the plan has none such. A step may have a known value in
/// each phase: the record's is that of the step's record before it.
int setting_of(const Expanded& full, const StoredRecord& stored, Phase phase) {
  for (std::size_t i = 0; i < full.settings.size(); ++i) {
    const Setting& s = full.settings[i];
    if (s.step != stored.step || s.position != stored.position) continue;
    if (s.position >= 0 || s.phase == phase) return static_cast<int>(i);
  }
  return -1;
}

}  // namespace

Result<Evaluation> replay(const ReadyPlan& plan, std::span<const StoredRecord> stored, const Ended& ended) {
  Evaluation evaluation(plan);
  int step = -1;
  Phase phase = Phase::contact;
  for (const StoredRecord& record : stored) {
    const int at = setting_of(plan.full, record, phase);
    if (at < 0)
      return Error{Error::Kind::store,
                   fmt::format("no setting {} of step {} in this plan", record.position, record.step),
                   {},
                   "these readings were taken under another plan"};
    const Setting& setting = plan.full.settings[static_cast<std::size_t>(at)];
    if (step >= 0 && (setting.step != step || setting.phase != phase)) evaluation.reduce(step);
    step = setting.step;
    phase = setting.phase;
    SettingRecord played = record.record;
    played.setting = at;
    evaluation.add(std::move(played));
  }
  if (step >= 0) evaluation.reduce(step);
  if (ended.early) evaluation.end(ended.reason);
  return evaluation;
}

}  // namespace jigwright
