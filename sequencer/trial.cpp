#include "sequencer/trial.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "sequencer/raw_readings.hpp"

namespace jigwright {

/// The playing part of one trial: what the supervisor awaits before it makes safe.
class Trials::Body {
 public:
  Body(Trials& trials, Player& player, int nest)
      : trials_(trials), plan_(*trials.plan_), expanded_(plan_.full), player_(player), nest_(nest) {
    records_.reserve(expanded_.settings.size());
    judged_.reserve(expanded_.metrics.size());
    found_.resize(expanded_.metrics.size(), false);
    began_ = trials_.bench_.clock().now();
  }

  Task<Done> play() {
    const auto& settings = expanded_.settings;
    for (std::size_t first = 0; first < settings.size() && !over_;) {
      std::size_t last = first + 1;
      while (last < settings.size() && settings[last].step == settings[first].step &&
             settings[last].phase == settings[first].phase)
        ++last;
      if (settings[first].phase == Phase::powered && missed_any()) {
        end(fmt::format("not powered after \"{}\" missed its limit", label(first_missed_name())));
        break;
      }
      co_await block(first, last);
      first = last;
    }
    co_return Done{};
  }

  std::vector<SettingRecord> records_;
  std::vector<Judged> judged_;
  std::vector<FindingRow> extra_;  ///< known values read because a step was in doubt
  Ended ended_;

 private:
  /// One step's settings of one phase, then its findings.
  Task<Done> block(std::size_t first, std::size_t last) {
    const std::size_t first_record = records_.size();
    bool proved = false;
    for (std::size_t i = first; i < last && !over_; ++i) {
      const Setting& setting = expanded_.settings[i];
      if (setting.only_if_doubtful && !doubtful(first_record)) continue;
      if (seconds(trials_.bench_.clock().now() - began_) > plan_.plan.time_limit_s) {
        end(fmt::format("the trial took longer than {}", format_quantity(plan_.plan.time_limit_s, Unit::second)));
        break;
      }
      tell(static_cast<int>(i));
      const auto played = co_await player_.play(setting, static_cast<int>(i), on_reading_);
      if (!played.ok()) {
        end(describe(played.error()));
        break;
      }
      records_.push_back(played.value());
      if (setting.only_if_doubtful) proved = known_value_right(played.value());
    }
    if (records_.size() > first_record) reduce(expanded_.settings[first].step, proved);
    co_return Done{};
  }

  void end(std::string reason) {
    over_ = true;
    if (ended_.early) return;
    ended_.early = true;
    ended_.reason = std::move(reason);
  }

  bool doubtful(std::size_t first_record) const {
    return std::any_of(
        records_.begin() + static_cast<std::ptrdiff_t>(first_record), records_.end(), [](const SettingRecord& r) {
          return r.ended == Next::gave_up || std::any_of(r.readings.begin(), r.readings.end(),
                                                         [](const Reading& x) { return x.state != ReadingState::ok; });
        });
  }

  /// Records the known value as a finding of the step, and says whether the meter is right.
  bool known_value_right(const SettingRecord& record) {
    const Setting& setting = expanded_.settings[static_cast<std::size_t>(record.setting)];
    const Jig& jig = *plan_.jig;
    const Accuracy& range = jig.accuracy(std::get<ReadMeter>(setting.act).setup);
    const double bound_V =
        range.of_reading * std::abs(jig.reference_V) + range.of_range * range.range + 2 * jig.reference_u_V;
    FindingRow row;
    row.metric.name = {plan_.plan.steps[static_cast<std::size_t>(setting.step)]->id, "known_value", setting.id};
    row.metric.unit = Unit::volt;
    row.metric.about = About::jig;
    Limit limit;
    limit.specification = {jig.reference_V - bound_V, jig.reference_V + bound_V};
    limit.applied = limit.specification;
    limit.nominal = jig.reference_V;
    limit.guard = Guard::none;
    limit.reason = "the meter's accuracy and the reference's uncertainty";
    row.limit = limit;
    Finding& finding = row.judged.finding;
    const bool all_ok = !record.readings.empty() && record.ended == Next::enough &&
                        std::all_of(record.readings.begin(), record.readings.end(),
                                    [](const Reading& r) { return r.state == ReadingState::ok; });
    finding.n = static_cast<int>(record.readings.size());
    if (all_ok) {
      double sum = 0;
      for (const Reading& r : record.readings) sum += r.value;
      finding.value = sum / finding.n;
      finding.u = bound_V / std::sqrt(3.0);
      finding.state = FindingState::measured;
    }
    row.judged = judge(finding, &*row.limit, false);
    const bool right = row.judged.verdict == Verdict::met;
    if (!right) end("the meter does not read its own known value right");
    trials_.observer_.finding(nest_, row.metric, &*row.limit, row.judged);
    extra_.push_back(std::move(row));
    return right;
  }

  /// New findings of this step from all its records so far; judges each; ends the trial where that must be.
  void reduce(int step, bool proved) {
    own_.clear();
    for (const SettingRecord& r : records_) {
      const Setting& s = expanded_.settings[static_cast<std::size_t>(r.setting)];
      if (s.step == step && s.position >= 0) own_.push_back(r);
    }
    const Step& of = *plan_.plan.steps[static_cast<std::size_t>(step)];
    const int base = expanded_.first_metric[static_cast<std::size_t>(step)];
    for (Finding& finding : of.reduce(Depth::full, own_, expanded_.settings)) {
      finding.metric += base;
      const auto at = static_cast<std::size_t>(finding.metric);
      if (found_[at]) continue;
      found_[at] = true;
      const std::optional<Limit>& limit = expanded_.limits[at];
      judged_.push_back(judge(finding, limit ? &*limit : nullptr, proved));
      tell_finding(judged_.back());
      consider(judged_.back());
    }
  }

  void consider(const Judged& j) {
    const Metric& metric = expanded_.metrics[static_cast<std::size_t>(j.finding.metric)];
    const bool bad = j.verdict == Verdict::missed || j.verdict == Verdict::invalid || j.verdict == Verdict::unsure;
    if (!bad) return;
    if (metric.about == About::jig)
      over_ = true;  // the judgement names the finding
    else if (plan_.plan.stop_at_first_miss && j.verdict == Verdict::missed)
      end("stopped at the first miss, as the plan says");
  }

  /// Without power, whatever is bad forbids power.
  bool missed_any() const {
    return std::any_of(judged_.begin(), judged_.end(), [&](const Judged& j) {
      const auto phase_bad =
          j.verdict == Verdict::missed || j.verdict == Verdict::invalid || j.verdict == Verdict::unsure;
      return phase_bad && !powered_yet();
    });
  }
  bool powered_yet() const {
    return std::any_of(records_.begin(), records_.end(), [&](const SettingRecord& r) {
      return expanded_.settings[static_cast<std::size_t>(r.setting)].phase == Phase::powered;
    });
  }
  const MetricName& first_missed_name() const {
    for (const Judged& j : judged_)
      if (j.verdict != Verdict::met && j.verdict != Verdict::recorded)
        return expanded_.metrics[static_cast<std::size_t>(j.finding.metric)].name;
    return expanded_.metrics.front().name;
  }

  void tell(int index) {
    progress_.nest = nest_;
    progress_.setting = index;
    progress_.settings = static_cast<int>(expanded_.settings.size());
    progress_.elapsed_s = seconds(trials_.bench_.clock().now() - began_);
    progress_.remaining_s = std::max(0.0, expanded_.usual_s - progress_.elapsed_s);
    const Setting& setting = expanded_.settings[static_cast<std::size_t>(index)];
    trials_.observer_.setting_started(progress_, plan_.plan.steps[static_cast<std::size_t>(setting.step)]->id, setting);
  }

  void tell_finding(const Judged& j) {
    const auto at = static_cast<std::size_t>(j.finding.metric);
    const std::optional<Limit>& limit = expanded_.limits[at];
    trials_.observer_.finding(nest_, expanded_.metrics[at], limit ? &*limit : nullptr, j);
  }

  Trials& trials_;
  const ReadyPlan& plan_;
  const Expanded& expanded_;
  Player& player_;
  int nest_;
  Duration began_;
  bool over_{false};  ///< nothing more is played; ended_ holds a reason only where no finding is one
  std::vector<bool> found_;
  std::vector<SettingRecord> own_;
  Progress progress_;
  Player::OnReading on_reading_ = [this](const Setting& setting, const Reading& reading) {
    trials_.observer_.reading(progress_, setting, reading);
  };
};

Trials::Trials(asio::io_context& io, Bench& bench, std::shared_ptr<const ReadyPlan> plan, Observer& observer,
               Person& person, Recorder& recorder, TrialSetup setup)
    : io_(io),
      bench_(bench),
      plan_(std::move(plan)),
      observer_(observer),
      person_(person),
      recorder_(recorder),
      setup_(std::move(setup)),
      leases_(io),
      rules_(*plan_->jig) {}

Trials::~Trials() = default;

void Trials::stop(std::string reason) {
  if (stop_.set) return;
  stop_.set = true;
  stop_.reason = std::move(reason);
  leases_.cancel_all();
  bench_.clock().cancel_all();
}

/// Asks every instrument who it is, once a run. A trial on the simulated jig must say so, whatever the setup claims.
Task<Result<Done>> Trials::identify() {
  if (identified_) co_return Done{};
  std::vector<InstrumentIdentity> out;
  Instrument* const all[] = {&bench_.meter(), &bench_.relays(), &bench_.source(), &bench_.supply(), &bench_.detector()};
  for (Instrument* instrument : all) {
    const auto who = co_await instrument->identify(bench_.clock().now() + from_seconds(2));
    if (!who.ok()) co_return who.error();
    const Identity& id = who.value();
    if (id.simulated != (setup_.origin == Origin::simulated))
      co_return Error{Error::Kind::instrument, "a simulated and a real instrument don't go together in a record",
                      id.instrument, "check the jig's links"};
    out.push_back({id.instrument, id.maker, id.model, id.serial, id.firmware});
  }
  if (!identified_) identities_ = std::move(out);
  identified_ = true;
  co_return Done{};
}

namespace {

std::vector<FindingRow> rows_of(const Expanded& expanded, const std::vector<Judged>& judged) {
  std::vector<FindingRow> rows;
  rows.reserve(expanded.metrics.size());
  std::vector<const Judged*> of(expanded.metrics.size(), nullptr);
  for (const Judged& j : judged) of[static_cast<std::size_t>(j.finding.metric)] = &j;
  for (std::size_t i = 0; i < expanded.metrics.size(); ++i) {
    FindingRow row;
    row.metric = expanded.metrics[i];
    row.limit = expanded.limits[i];
    if (of[i] != nullptr) {
      row.judged = *of[i];
    } else {
      row.judged.finding.metric = static_cast<int>(i);
      row.judged.finding.state = FindingState::skipped;
      row.judged.verdict = Verdict::no_evidence;
    }
    rows.push_back(std::move(row));
  }
  return rows;
}

Outcome outcome_of(const Expanded& expanded, const std::vector<Judged>& judged, const Ended& ended) {
  const std::size_t n = expanded.limits.size();
  const std::unique_ptr<bool[]> limited(new bool[n]);
  for (std::size_t i = 0; i < n; ++i) limited[i] = expanded.limits[i].has_value();
  Outcome outcome = judge_trial(expanded.metrics, {limited.get(), n}, judged, ended);
  // Rows of findings stand in the order of metrics.
  if (outcome.deciding >= 0) outcome.deciding = judged[static_cast<std::size_t>(outcome.deciding)].finding.metric;
  return outcome;
}

}  // namespace

TrialStart Trials::start_of(int nest, std::string serial, std::string order) const {
  TrialStart start;
  start.serial = std::move(serial);
  start.order = std::move(order);
  start.station = setup_.station;
  start.nest = nest;
  start.at_us = setup_.utc_us ? setup_.utc_us() : 0;
  start.origin = setup_.origin;
  start.operator_name = setup_.operator_name;
  start.program = setup_.program;
  start.depth = "full";
  start.plan = plan_->plan.id;
  start.limit_set = plan_->limits.id;
  start.limit_revision = plan_->limits.revision;
  start.documents = setup_.documents;
  start.documents.push_back({"plan", plan_->plan.source->name, plan_->plan.source->text});
  start.documents.push_back({"jig", plan_->jig->source_text->name, plan_->jig->source_text->text});
  start.documents.push_back({"limits", plan_->limits.source->name, plan_->limits.source->text});
  return start;
}

void Trials::conclude(Body& body, const std::string& unsafe, TrialEnd& end) const {
  end.outcome = outcome_of(plan_->full, body.judged_, body.ended_);
  if (!unsafe.empty() && end.outcome.judgement == Judgement::go) {
    end.outcome = {};
    end.outcome.void_reason = "the safe state is not confirmed: " + unsafe;
  }
  end.safe_state = unsafe;
  end.findings = rows_of(plan_->full, body.judged_);
  for (FindingRow& row : body.extra_) end.findings.push_back(std::move(row));
  for (const StepKind* kind : plan_->plan.kinds) {
    const std::pair<std::string, int> version{std::string(kind->name), kind->reduce_version};
    if (std::find(end.reduce_versions.begin(), end.reduce_versions.end(), version) == end.reduce_versions.end())
      end.reduce_versions.push_back(version);
  }
  end.readings_format = raw_readings_format;
  end.readings = encode_readings(body.records_, plan_->full.settings);
}

/// A NO-GO's action is its step's own text. A VOID says nothing of the board: the text of a step that only looks at the
/// jig (contact, a known value) helps there, another step's would send a sound board to the reject shelf.
std::string Trials::next_action(const Outcome& outcome) const {
  if (outcome.judgement == Judgement::go) return {};
  const std::string again = "Try the board once more; if it is VOID again, call the engineer.";
  if (outcome.deciding < 0) return again;
  const std::string& step = plan_->full.metrics[static_cast<std::size_t>(outcome.deciding)].name.step;
  const bool of_jig = std::all_of(plan_->full.metrics.begin(), plan_->full.metrics.end(),
                                  [&](const Metric& m) { return m.name.step != step || m.about == About::jig; });
  std::string text;
  for (const auto& s : plan_->plan.steps)
    if (s->id == step) text = s->next_action;
  if (outcome.judgement == Judgement::void_ && !of_jig) return again;
  return text;
}

/// Identity, safe state, the plan's settings. Leaves the reason in the body where it did not come to its end.
Task<Done> Trials::play(Body& body, Player& player, int nest, const std::string& serial, int attempt) {
  const auto placed = bench_.board_placed(nest, serial, attempt);
  const auto known = co_await identify();
  const std::string unsafe = co_await player.make_safe();
  if (!placed.ok()) {
    body.ended_ = {true, describe(placed.error())};
  } else if (!known.ok()) {
    body.ended_ = {true, describe(known.error())};
  } else if (!unsafe.empty()) {
    body.ended_ = {true, "no safe state at the start: " + unsafe};
  } else if (stop_.set) {
    body.ended_ = {true, stop_.reason};
  } else {
    co_await body.play();
  }
  co_return Done{};
}

Task<TrialResult> Trials::run(int nest, std::string serial, std::string order) {
  TrialResult result;
  result.start = start_of(nest, std::move(serial), std::move(order));
  const TrialStart& start = result.start;
  TrialEnd& end = result.end;
  const Duration began = bench_.clock().now();
  const auto opened = co_await recorder_.begin(start);
  if (!opened.ok()) {
    end.outcome.void_reason = "the trial could not be recorded, so it was not begun: " + describe(opened.error());
    observer_.trial_ended(nest, start, end, "Call the engineer: the store can't record.", &opened.error());
    co_return result;
  }
  observer_.trial_started(nest, start);

  Player player(bench_, leases_, rules_, person_, stop_, nest);
  Body body(*this, player, nest);
  try {
    co_await play(body, player, nest, start.serial, opened.value().attempt);
  } catch (const std::exception& fault) {
    body.ended_ = {true, std::string("a fault of this program: ") + fault.what()};
  }
  // Every path comes here: the nest is made safe whatever the body said.
  const std::string unsafe = co_await player.make_safe();
  end.instruments = identities_;
  end.took_ms = std::chrono::duration_cast<std::chrono::milliseconds>(bench_.clock().now() - began).count();
  conclude(body, unsafe, end);

  std::string action = next_action(end.outcome);
  const auto finished = co_await recorder_.finish(opened.value(), end);
  result.recorded = finished.ok();
  if (!finished.ok()) {
    // GO is shown only after its record is durable.
    if (end.outcome.judgement == Judgement::go) end.outcome.judgement = Judgement::void_;
    end.outcome.void_reason = "the trial could not be recorded: " + describe(finished.error());
    action = "Call the engineer: the store can't record.";
  }
  observer_.trial_ended(nest, start, end, action, finished.ok() ? nullptr : &finished.error());
  co_return result;
}

}  // namespace jigwright
