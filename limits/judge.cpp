#include "limits/judge.hpp"

#include <fmt/format.h>

#include <array>
#include <cmath>

namespace jigwright {
namespace {

bool usable(const Bounds& b) {
  return (b.low || b.high) && (!b.low || std::isfinite(*b.low)) && (!b.high || std::isfinite(*b.high));
}

/// 2u within the budget; a limit without a budget asks nothing. An unknown u is not within any budget.
bool sure(const Finding& finding, const Limit& limit) {
  if (!(limit.budget_U > 0)) return true;
  return finding.u >= 0 && 2 * finding.u <= budget_at(limit, finding.value);
}

Verdict verdict_of_value(const Finding& finding, const Limit& limit) {
  if (!std::isfinite(finding.value) || !usable(limit.applied)) return Verdict::invalid;
  if (!sure(finding, limit)) return Verdict::unsure;
  const Bounds& b = limit.applied;
  const bool inside = (!b.low || finding.value >= *b.low) && (!b.high || finding.value <= *b.high);
  return inside ? Verdict::met : Verdict::missed;
}

Verdict verdict_of(const Finding& finding, const Limit& limit, bool proved) {
  switch (finding.state) {
    case FindingState::measured:
      return verdict_of_value(finding, limit);
    case FindingState::over_range:
    case FindingState::not_settled:
      return proved ? Verdict::missed : Verdict::invalid;
    case FindingState::skipped:
      return Verdict::no_evidence;
    case FindingState::no_data:
      break;
  }
  return Verdict::invalid;
}

/// The trial's findings against its metrics, once over.
class Tally {
 public:
  Tally(std::span<const Metric> metrics, std::span<const bool> limited, std::span<const Judged> judged)
      : metrics_(metrics), limited_(limited), judged_(judged) {}

  /// First entry with this verdict about board or jig; -1 if none. A limit or none: a miss is a miss.
  int first_miss(About about) const {
    for (std::size_t i = 0; i < judged_.size(); ++i)
      if (judged_[i].verdict == Verdict::missed && metric(i) != nullptr && metric(i)->about == about)
        return static_cast<int>(i);
    return -1;
  }

  /// First entry with this verdict whose metric has a limit.
  int first(Verdict verdict) const {
    for (std::size_t i = 0; i < judged_.size(); ++i)
      if (judged_[i].verdict == verdict && (metric(i) == nullptr || has_limit(judged_[i].finding.metric)))
        return static_cast<int>(i);
    return -1;
  }

  /// First limited metric that no entry meets; -1 if every one is met.
  int first_unmet() const {
    std::vector<bool> met(metrics_.size(), false);
    for (std::size_t i = 0; i < judged_.size(); ++i)
      if (metric(i) != nullptr && judged_[i].verdict == Verdict::met)
        met[static_cast<std::size_t>(judged_[i].finding.metric)] = true;
    for (std::size_t m = 0; m < metrics_.size(); ++m)
      if (has_limit(static_cast<int>(m)) && !met[m]) return static_cast<int>(m);
    return -1;
  }

  bool any_limit() const {
    for (std::size_t m = 0; m < metrics_.size(); ++m)
      if (has_limit(static_cast<int>(m))) return true;
    return false;
  }

  const Metric* metric(std::size_t entry) const {
    const int at = judged_[entry].finding.metric;
    return at >= 0 && static_cast<std::size_t>(at) < metrics_.size() ? &metrics_[static_cast<std::size_t>(at)]
                                                                     : nullptr;
  }

  About about(int entry) const {
    const Metric* m = metric(static_cast<std::size_t>(entry));
    return m == nullptr ? About::board : m->about;
  }

  std::string name(int entry) const {
    const Metric* m = metric(static_cast<std::size_t>(entry));
    return m == nullptr ? "a finding of no known metric" : label(m->name);
  }

 private:
  bool has_limit(int metric) const {
    return static_cast<std::size_t>(metric) < limited_.size() && limited_[static_cast<std::size_t>(metric)];
  }

  std::span<const Metric> metrics_;
  std::span<const bool> limited_;
  std::span<const Judged> judged_;
};

std::string why_invalid(FindingState state, About about) {
  if (state == FindingState::over_range && about == About::jig) return "was over range";
  if (state == FindingState::over_range) return "was over range, and the instrument is not proved right";
  if (state == FindingState::not_settled) return "never settled, and the instrument is not proved right";
  if (state == FindingState::no_data) return "gave no usable reading";
  return "gave no usable value";
}

std::string missed_by_jig(FindingState state) {
  if (state == FindingState::over_range) return "was over range";
  if (state == FindingState::not_settled) return "never settled";
  return "missed its limit";
}

Outcome void_by(int deciding, std::string reason) {
  return {Judgement::void_, deciding, std::move(reason)};
}

/// Why a trial that ended by itself, without a miss by the board, is no GO; nothing when it is one.
std::optional<Outcome> doubt(const Tally& t, std::span<const Metric> metrics, std::span<const Judged> judged) {
  auto state = [&](int i) { return judged[static_cast<std::size_t>(i)].finding.state; };
  if (const int i = t.first_miss(About::jig); i >= 0)
    return void_by(i, fmt::format("{} {}: the jig is at fault, not the board", t.name(i), missed_by_jig(state(i))));
  if (const int i = t.first(Verdict::missed); i >= 0) return void_by(i, t.name(i) + " missed its limit");
  if (const int i = t.first(Verdict::unsure); i >= 0)
    return void_by(i, t.name(i) + " is less certain than its limit allows");
  if (const int i = t.first(Verdict::invalid); i >= 0)
    return void_by(i, t.name(i) + " " + why_invalid(state(i), t.about(i)));
  if (const int i = t.first(Verdict::no_evidence); i >= 0) return void_by(i, t.name(i) + " was not read");
  if (const int m = t.first_unmet(); m >= 0)
    return void_by(-1, label(metrics[static_cast<std::size_t>(m)].name) + " was not read");
  if (!t.any_limit()) return void_by(-1, "no limit was judged");
  return std::nullopt;
}

}  // namespace

std::string_view word(Judgement judgement) {
  static constexpr std::array<std::string_view, 3> words{"GO", "NO-GO", "VOID"};
  return words[static_cast<std::size_t>(judgement)];
}

std::string_view word(Verdict verdict) {
  static constexpr std::array<std::string_view, 6> words{"met",         "missed",   "unsure",
                                                         "no evidence", "recorded", "invalid"};
  return words[static_cast<std::size_t>(verdict)];
}

Judged judge(const Finding& finding, const Limit* limit, bool proved) {
  Judged out;
  out.finding = finding;
  out.verdict = limit == nullptr ? Verdict::recorded : verdict_of(finding, *limit, proved);
  if (limit != nullptr && finding.state == FindingState::measured) out.margin = margin(*limit, finding.value);
  return out;
}

Outcome judge_trial(std::span<const Metric> metrics, std::span<const bool> limited, std::span<const Judged> judged,
                    const Ended& ended) {
  const Tally tally(metrics, limited, judged);
  if (const int i = tally.first_miss(About::board); i >= 0) return {Judgement::no_go, i, {}};
  if (ended.early) return void_by(-1, ended.reason.empty() ? "the trial was ended early" : ended.reason);
  if (auto why = doubt(tally, metrics, judged)) return *why;
  return {Judgement::go, -1, {}};
}

}  // namespace jigwright
