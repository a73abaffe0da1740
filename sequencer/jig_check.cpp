#include "sequencer/jig_check.hpp"

#include <fmt/format.h>

#include <algorithm>

#include "steps/common.hpp"

namespace jigwright {
namespace {

/// What the parts of one check must not share, and must.
void check_beside(const ReadyPlan& plan, const CheckPlans& before, Faults& faults) {
  const JigCheckPart& part = plan.plan.check;
  for (const auto& other : before) {
    if (other->plan.check.serial == part.serial)
      faults.fault(part.region, fmt::format("serial \"{}\" is that of part \"{}\" too", part.serial, other->plan.id),
                   "give each thing that lies in the nest a serial of its own");
    if (other->plan.id == plan.plan.id)
      faults.fault(part.region, fmt::format("a part with the id \"{}\" came before", plan.plan.id),
                   "answers and records go by it: give each plan an id of its own");
  }
  if (!before.empty() && before.front()->plan.jig_file != plan.plan.jig_file)
    faults.fault(part.region, fmt::format("this part is of another jig, {}", plan.plan.jig_file),
                 "one check proves one jig: " + before.front()->plan.jig_file);
}

/// "relays: change (K12, meter to input); ... and 9 more".
std::string some(const std::vector<std::string>& labels) {
  constexpr std::size_t most = 4;
  std::string out;
  for (std::size_t i = 0; i < labels.size() && i < most; ++i) out += (i == 0 ? "" : "; ") + labels[i];
  return labels.size() > most ? fmt::format("{} and {} more", out, labels.size() - most) : out;
}

std::string missed_findings(const TrialEnd& end) {
  std::vector<std::string> out;
  for (const FindingRow& row : end.findings)
    if (row.judged.verdict == Verdict::missed) out.push_back(label(row.metric.name));
  return some(out);
}

bool any_missed(const TrialEnd& end) {
  return std::any_of(end.findings.begin(), end.findings.end(),
                     [](const FindingRow& r) { return r.judged.verdict == Verdict::missed; });
}

/// "1 nF at +5 V" is of "1 nF", "1 nF2" is not.
bool at_load(const std::string& variant, const std::string& load) {
  return variant == load || variant.starts_with(load + " ");
}

PartSays reject_sample(const JigCheckPart& part, const TrialEnd& end) {
  if (end.outcome.judgement == Judgement::go)
    return {PartVerdict::failed, fmt::format("the reject sample is GO: the jig does not find it at {}", part.load)};
  std::vector<std::string> elsewhere;
  bool there = false;
  for (const FindingRow& row : end.findings) {
    if (row.judged.verdict != Verdict::missed) continue;
    const bool named = row.metric.name.step == part.must_miss && at_load(row.metric.name.variant, part.load);
    there = there || named;
    if (!named) elsewhere.push_back(label(row.metric.name));
  }
  if (!elsewhere.empty()) return {PartVerdict::failed, "missed elsewhere than at its load: " + some(elsewhere)};
  if (end.outcome.judgement == Judgement::no_go && there) return {PartVerdict::met, {}};
  return {PartVerdict::in_doubt, end.outcome.void_reason};
}

}  // namespace

CheckPlans read_check_plans(const std::string& first_path, Faults& faults) {
  CheckPlans out;
  std::vector<std::string> paths;
  const std::size_t before = faults.count(Severity::fault);
  for (std::string path = first_path; !path.empty();) {
    const auto plan = read_plan(path, faults);
    if (!plan) break;
    const JigCheckPart& part = plan->plan.check;
    if (part.purpose == Purpose::board) {
      faults.fault({plan->plan.source, 0, 0, 1}, fmt::format("plan \"{}\" is no part of a jig's check", plan->plan.id),
                   "a part has a table [jig_check] with purpose, serial and place");
      break;
    }
    paths.push_back(path);
    check_beside(*plan, out, faults);
    out.push_back(plan);
    path = part.next;
    if (std::find(paths.begin(), paths.end(), path) == paths.end()) continue;
    faults.fault(part.region, fmt::format("\"next\" leads back to {}", path), "the last part names no next one");
    break;
  }
  if (faults.count(Severity::fault) > before) out.clear();
  return out;
}

PartSays judge_part(const JigCheckPart& part, const TrialEnd& end, bool recorded) {
  if (!recorded) return {PartVerdict::in_doubt, end.outcome.void_reason};
  if (!end.safe_state.empty()) return {PartVerdict::failed, "the safe state is not confirmed: " + end.safe_state};
  if (part.purpose == Purpose::reject_sample) return reject_sample(part, end);
  if (any_missed(end)) return {PartVerdict::failed, missed_findings(end)};
  if (end.outcome.judgement == Judgement::go) return {PartVerdict::met, {}};
  return {PartVerdict::in_doubt, end.outcome.void_reason};
}

std::vector<std::string> untold(const CheckPlans& plans) {
  std::vector<std::string> out;
  if (plans.empty()) return out;
  const auto told = [&](const std::string& variant, std::string_view name) {
    return std::any_of(plans.begin(), plans.end(), [&](const auto& plan) {
      return std::any_of(plan->full.metrics.begin(), plan->full.metrics.end(), [&](const Metric& m) {
        return m.about == About::jig && m.name.variant == variant && (name.empty() || m.name.name == name);
      });
    });
  };
  std::string series;
  for (const Relay& relay : plans.front()->jig->relays) {
    const std::string words = relay_in_words(relay);
    if (!told(words, {}))
      out.push_back(words);
    else if (relay.role == Role::load && !told(words, "series"))
      series += (series.empty() ? "series resistance of " : ", ") + relay.of;
  }
  if (!series.empty()) out.push_back(series);
  return out;
}

}  // namespace jigwright
