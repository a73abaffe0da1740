#include "sequencer/trial.hpp"

#include <fmt/format.h>

#include <algorithm>

#include "sequencer/evaluation.hpp"
#include "sequencer/raw_readings.hpp"

namespace jigwright {

/// The playing part of one trial: what the supervisor awaits before it makes safe.
class Trials::Body {
 public:
  Body(Trials& trials, Player& player, int nest)
      : trials_(trials), plan_(*trials.plan_), player_(player), nest_(nest), evaluation_(plan_) {
    began_ = trials_.bench_.clock().now();
  }

  /// Phase by phase and step by step, until the plan's end or whatever comes first.
  Task<Done> play() {
    const auto& settings = plan_.full.settings;
    for (std::size_t first = 0; first < settings.size() && !evaluation_.over();) {
      std::size_t last = first + 1;
      while (last < settings.size() && settings[last].step == settings[first].step &&
             settings[last].phase == settings[first].phase)
        ++last;
      if (settings[first].phase == Phase::powered) {
        const std::string missed = evaluation_.power_forbidden_by();
        if (!missed.empty()) evaluation_.end(fmt::format("not powered after \"{}\" was not met", missed));
      }
      if (!evaluation_.over()) co_await block(first, last);
      first = last;
    }
    co_return Done{};
  }

  Evaluation& evaluation() { return evaluation_; }

 private:
  /// One step's settings of one phase, then its findings.
  Task<Done> block(std::size_t first, std::size_t last) {
    const std::size_t records_before = evaluation_.records().size();
    for (std::size_t i = first; i < last && !evaluation_.over(); ++i) {
      const Setting& setting = plan_.full.settings[i];
      if (setting.only_if_doubtful && !evaluation_.doubtful()) continue;
      if (too_long()) break;
      tell(static_cast<int>(i));
      const auto played = co_await player_.play(setting, static_cast<int>(i), on_reading_);
      if (!played.ok()) {
        evaluation_.end(describe(played.error()));
        break;
      }
      evaluation_.add(played.value());
      if (setting.only_if_doubtful) tell_known_value();
    }
    if (evaluation_.records().size() == records_before) co_return Done{};
    const std::size_t judged_before = evaluation_.judged().size();
    evaluation_.reduce(plan_.full.settings[first].step);
    tell_findings(judged_before);
    co_return Done{};
  }

  bool too_long() {
    if (seconds(trials_.bench_.clock().now() - began_) <= plan_.plan.time_limit_s) return false;
    evaluation_.end(
        fmt::format("the trial took longer than {}", format_quantity(plan_.plan.time_limit_s, Unit::second)));
    return true;
  }

  void tell(int index) {
    progress_.nest = nest_;
    progress_.setting = index;
    progress_.settings = static_cast<int>(plan_.full.settings.size());
    progress_.elapsed_s = seconds(trials_.bench_.clock().now() - began_);
    progress_.remaining_s = std::max(0.0, plan_.full.usual_s - progress_.elapsed_s);
    const Setting& setting = plan_.full.settings[static_cast<std::size_t>(index)];
    trials_.observer_.setting_started(progress_, plan_.plan.steps[static_cast<std::size_t>(setting.step)]->id, setting);
  }

  void tell_known_value() {
    const FindingRow& row = evaluation_.known_values().back();
    trials_.observer_.finding(nest_, row.metric, &*row.limit, row.judged);
  }

  void tell_findings(std::size_t from) {
    for (std::size_t i = from; i < evaluation_.judged().size(); ++i) {
      const Judged& j = evaluation_.judged()[i];
      const auto at = static_cast<std::size_t>(j.finding.metric);
      const std::optional<Limit>& limit = plan_.full.limits[at];
      trials_.observer_.finding(nest_, plan_.full.metrics[at], limit ? &*limit : nullptr, j);
    }
  }

  Trials& trials_;
  const ReadyPlan& plan_;
  Player& player_;
  int nest_;
  Evaluation evaluation_;
  Duration began_;
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
  person_.stop();
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

TrialStart Trials::start_of(int nest, std::string serial, std::string order) const {
  TrialStart start;
  start.serial = std::move(serial);
  start.order = std::move(order);
  start.station = setup_.station;
  start.nest = nest;
  start.at_us = setup_.utc_us ? setup_.utc_us() : 0;
  start.origin = setup_.origin;
  start.purpose = setup_.purpose;
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

void Trials::conclude(const Evaluation& evaluation, const std::string& unsafe, TrialEnd& end) const {
  end.outcome = evaluation.outcome();
  if (!unsafe.empty() && end.outcome.judgement == Judgement::go) {
    end.outcome = {};
    end.outcome.void_reason = "the safe state is not confirmed: " + unsafe;
  }
  end.safe_state = unsafe;
  end.findings = evaluation.rows();
  for (const StepKind* kind : plan_->plan.kinds) {
    const std::pair<std::string, int> version{std::string(kind->name), kind->reduce_version};
    if (std::find(end.reduce_versions.begin(), end.reduce_versions.end(), version) == end.reduce_versions.end())
      end.reduce_versions.push_back(version);
  }
  end.readings_format = raw_readings_format;
  end.readings = encode_readings(evaluation.records(), plan_->full.settings, *plan_->jig);
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
    body.evaluation().end(describe(placed.error()));
  } else if (!known.ok()) {
    body.evaluation().end(describe(known.error()));
  } else if (!unsafe.empty()) {
    body.evaluation().end("no safe state at the start: " + unsafe);
  } else if (stop_.set) {
    body.evaluation().end(stop_.reason);
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
  result.uuid = opened.value().uuid;
  observer_.trial_started(nest, start);

  Player player(bench_, leases_, rules_, person_, stop_, nest);
  Body body(*this, player, nest);
  try {
    co_await play(body, player, nest, start.serial, opened.value().attempt);
  } catch (const std::exception& fault) {
    body.evaluation().end(std::string("a fault of this program: ") + fault.what());
  }
  // Every path comes here: the nest is made safe whatever the body said.
  const std::string unsafe = co_await player.make_safe();
  end.instruments = identities_;
  end.took_ms = std::chrono::duration_cast<std::chrono::milliseconds>(bench_.clock().now() - began).count();
  end.at_us = setup_.utc_us ? setup_.utc_us() : 0;
  conclude(body.evaluation(), unsafe, end);

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
