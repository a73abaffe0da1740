#include "limits/judge.hpp"

#include <doctest/doctest.h>

#include <array>
#include <cmath>
#include <vector>

using namespace jigwright;

namespace {

const double no_number = std::numeric_limits<double>::quiet_NaN();
const double infinite = std::numeric_limits<double>::infinity();

/// Half a millivolt less 20 uV of budget: common practice for an output offset, no source.
Limit offset_limit() {
  Limit limit;
  limit.specification = {-0.5e-3, 0.5e-3};
  limit.nominal = 0;
  limit.budget_U = 20e-6;
  return apply_guard(limit, Unit::volt).value();
}

Finding found(double value, double u = 5e-6, FindingState state = FindingState::measured) {
  Finding f;
  f.metric = 0;
  f.value = value;
  f.u = u;
  f.n = 10;
  f.state = state;
  return f;
}

Verdict verdict(const Finding& finding, const Limit& limit, bool proved = true) {
  return judge(finding, &limit, proved).verdict;
}

Metric metric_named(std::string name, About about = About::board) {
  Metric m;
  m.name = {"offset", std::move(name), ""};
  m.unit = Unit::volt;
  m.about = about;
  return m;
}

Judged entry(int metric, Verdict v, FindingState state = FindingState::measured) {
  Judged j;
  j.finding.metric = metric;
  j.finding.state = state;
  j.verdict = v;
  return j;
}

constexpr std::array all_states{FindingState::measured, FindingState::over_range, FindingState::not_settled,
                                FindingState::no_data, FindingState::skipped};

}  // namespace

TEST_CASE("a value exactly on the high limit is met") {
  const Limit limit = offset_limit();
  CHECK(verdict(found(*limit.applied.high), limit) == Verdict::met);
  CHECK(verdict(found(std::nextafter(*limit.applied.high, 1)), limit) == Verdict::missed);
}

TEST_CASE("a value exactly on the low limit is met") {
  const Limit limit = offset_limit();
  CHECK(verdict(found(*limit.applied.low), limit) == Verdict::met);
  CHECK(verdict(found(std::nextafter(*limit.applied.low, -1)), limit) == Verdict::missed);
}

TEST_CASE("a value inside the specification but inside the guard band is missed") {
  CHECK(verdict(found(0.49e-3), offset_limit()) == Verdict::missed);
}

TEST_CASE("a one-sided limit asks nothing of the other side") {
  Limit limit;
  limit.specification.high = 5e-3;
  limit = apply_guard(limit, Unit::volt).value();
  CHECK(verdict(found(-1e9), limit) == Verdict::met);
  CHECK(verdict(found(5e-3), limit) == Verdict::met);
  CHECK(verdict(found(5.1e-3), limit) == Verdict::missed);
}

TEST_CASE("zero is met only where zero is allowed") {
  CHECK(verdict(found(0), offset_limit()) == Verdict::met);
  CHECK(verdict(found(-0.0), offset_limit()) == Verdict::met);
  Limit gain;
  gain.specification = {99.9, 100.1};
  gain = apply_guard(gain, Unit::ratio).value();
  CHECK(verdict(found(0, 0), gain) == Verdict::missed);
}

TEST_CASE("a measured value that is no number is invalid, proved or not") {
  for (const double v : {no_number, infinite, -infinite}) {
    CHECK(verdict(found(v), offset_limit(), true) == Verdict::invalid);
    CHECK(verdict(found(v), offset_limit(), false) == Verdict::invalid);
  }
}

TEST_CASE("over range and never settling are a miss where the instrument is proved right, else invalid") {
  for (const FindingState state : {FindingState::over_range, FindingState::not_settled}) {
    CHECK(verdict(found(0, 0, state), offset_limit(), true) == Verdict::missed);
    CHECK(verdict(found(0, 0, state), offset_limit(), false) == Verdict::invalid);
  }
}

TEST_CASE("no data is invalid and skipped is no evidence, proved or not") {
  for (const bool proved : {true, false}) {
    CHECK(verdict(found(0, 0, FindingState::no_data), offset_limit(), proved) == Verdict::invalid);
    CHECK(verdict(found(0, 0, FindingState::skipped), offset_limit(), proved) == Verdict::no_evidence);
  }
}

TEST_CASE("a finding less certain than the budget is unsure, neither met nor missed") {
  CHECK(verdict(found(0, 10e-6), offset_limit()) == Verdict::met);  // 2u is the budget
  CHECK(verdict(found(0, 10.001e-6), offset_limit()) == Verdict::unsure);
  CHECK(verdict(found(1, 10.001e-6), offset_limit()) == Verdict::unsure);
}

TEST_CASE("a finding of unknown uncertainty is within no budget") {
  CHECK(verdict(found(0, no_number), offset_limit()) == Verdict::unsure);
  CHECK(verdict(found(0, infinite), offset_limit()) == Verdict::unsure);
  CHECK(verdict(found(0, -1e-6), offset_limit()) == Verdict::unsure);
}

TEST_CASE("a budget that grows with the reading lets a gross miss be a miss") {
  // 0.5 mV + 2 % of 3.9 V is 78.5 mV.
  Limit detector;
  detector.specification.high = 5e-3;
  detector.budget_U = 0.5e-3;
  detector.budget_of_reading = 0.02;
  detector = apply_guard(detector, Unit::volt).value();
  CHECK(verdict(found(3.9, 39e-3), detector) == Verdict::missed);
  CHECK(verdict(found(-3.9, 39e-3), detector) == Verdict::met);
  CHECK(verdict(found(3.9, 39.5e-3), detector) == Verdict::unsure);
  CHECK(verdict(found(1e-3, 0.3e-3), detector) == Verdict::unsure);
}

TEST_CASE("a limit without a budget asks nothing of the uncertainty") {
  Limit limit;
  limit.specification.low = 150;
  limit.guard = Guard::none;
  limit = apply_guard(limit, Unit::ohm).value();
  CHECK(verdict(found(200, no_number), limit) == Verdict::met);
  CHECK(verdict(found(100, 1e6), limit) == Verdict::missed);
}

TEST_CASE("without a limit a finding is recorded, whatever its state") {
  for (const FindingState state : all_states)
    CHECK(judge(found(1, 1, state), nullptr, true).verdict == Verdict::recorded);
}

TEST_CASE("a limit that has no usable bound is met by nothing") {
  Limit limit;
  CHECK(verdict(found(0), limit) == Verdict::invalid);
  limit.applied.high = no_number;
  CHECK(verdict(found(0), limit) == Verdict::invalid);
}

TEST_CASE("only a measured, finite, certain value within its bounds is ever met") {
  const Limit limit = offset_limit();
  int met = 0;
  for (const FindingState state : all_states)
    for (const bool proved : {true, false})
      for (const double value : {no_number, infinite, -infinite, 0.0, 0.48e-3, 0.49e-3, -0.48e-3, -1.0})
        for (const double u : {no_number, infinite, 0.0, 10e-6, 11e-6}) {
          const bool allowed =
              state == FindingState::measured && value >= -0.48e-3 && value <= 0.48e-3 && 2 * u <= 20e-6;
          CHECK((verdict(found(value, u, state), limit, proved) == Verdict::met) == allowed);
          met += allowed;
        }
  CHECK(met == 12);
}

TEST_CASE("the margin is told for measured values only") {
  const Limit limit = offset_limit();
  CHECK(judge(found(0.24e-3), &limit, true).margin == doctest::Approx(0.5));
  CHECK(std::isnan(judge(found(0, 0, FindingState::over_range), &limit, true).margin));
  CHECK(std::isnan(judge(found(0), nullptr, true).margin));
}

TEST_CASE("every limited metric met is GO") {
  const std::vector<Metric> metrics{metric_named("a"), metric_named("b")};
  const bool limited[]{true, false};
  const std::vector<Judged> judged{entry(0, Verdict::met), entry(1, Verdict::recorded)};
  CHECK(judge_trial(metrics, limited, judged, {}).judgement == Judgement::go);
}

TEST_CASE("a missed limit is NO-GO whatever happens afterwards") {
  const std::vector<Metric> metrics{metric_named("a"), metric_named("b"), metric_named("contact", About::jig)};
  const bool limited[]{true, true, true};
  const std::vector<Judged> judged{entry(0, Verdict::met), entry(1, Verdict::missed), entry(2, Verdict::missed)};
  const Outcome outcome = judge_trial(metrics, limited, judged, {true, "the lid was opened"});
  CHECK(outcome.judgement == Judgement::no_go);
  CHECK(outcome.deciding == 1);
  CHECK(outcome.void_reason.empty());
}

TEST_CASE("an early end without a miss is VOID with its reason") {
  const std::vector<Metric> metrics{metric_named("a")};
  const bool limited[]{true};
  const std::vector<Judged> judged{entry(0, Verdict::met)};
  const Outcome outcome = judge_trial(metrics, limited, judged, {true, "the lid was opened"});
  CHECK(outcome.judgement == Judgement::void_);
  CHECK(outcome.void_reason == "the lid was opened");
  CHECK(judge_trial(metrics, limited, judged, {true, ""}).void_reason == "the trial was ended early");
}

TEST_CASE("a limit about the jig missed is VOID, not the board's fault") {
  const std::vector<Metric> metrics{metric_named("a"), metric_named("contact", About::jig)};
  const bool limited[]{true, true};
  const std::vector<Judged> judged{entry(0, Verdict::unsure), entry(1, Verdict::missed)};
  const Outcome outcome = judge_trial(metrics, limited, judged, {});
  CHECK(outcome.judgement == Judgement::void_);
  CHECK(outcome.deciding == 1);
  CHECK(outcome.void_reason == "offset: contact missed its limit: the jig is at fault, not the board");
}

TEST_CASE("doubts are told in the order unsure, invalid, no evidence") {
  const std::vector<Metric> metrics{metric_named("a"), metric_named("b"), metric_named("c")};
  const bool limited[]{true, true, true};
  std::vector<Judged> judged{entry(0, Verdict::no_evidence, FindingState::skipped),
                             entry(1, Verdict::invalid, FindingState::over_range), entry(2, Verdict::unsure)};
  CHECK(judge_trial(metrics, limited, judged, {}).void_reason == "offset: c is less certain than its limit allows");
  judged[2].verdict = Verdict::met;
  CHECK(judge_trial(metrics, limited, judged, {}).void_reason ==
        "offset: b was over range, and the instrument is not proved right");
  judged[1].finding.state = FindingState::no_data;
  CHECK(judge_trial(metrics, limited, judged, {}).void_reason == "offset: b gave no usable reading");
  judged[1].verdict = Verdict::met;
  CHECK(judge_trial(metrics, limited, judged, {}).void_reason == "offset: a was not read");
}

TEST_CASE("a limited metric without an entry is no evidence") {
  const std::vector<Metric> metrics{metric_named("a"), metric_named("b")};
  const bool limited[]{true, true};
  const std::vector<Judged> judged{entry(0, Verdict::met)};
  const Outcome outcome = judge_trial(metrics, limited, judged, {});
  CHECK(outcome.judgement == Judgement::void_);
  CHECK(outcome.void_reason == "offset: b was not read");
}

TEST_CASE("a trial in which nothing has a limit proves nothing") {
  const std::vector<Metric> metrics{metric_named("a")};
  const bool limited[]{false};
  const std::vector<Judged> judged{entry(0, Verdict::recorded)};
  const Outcome outcome = judge_trial(metrics, limited, judged, {});
  CHECK(outcome.judgement == Judgement::void_);
  CHECK(outcome.void_reason == "no limit was judged");
  CHECK(judge_trial({}, {}, {}, {}).judgement == Judgement::void_);
}

TEST_CASE("a finding of no known metric never helps a board to GO") {
  const std::vector<Metric> metrics{metric_named("a")};
  const bool limited[]{true};
  for (const int metric : {-1, 1, 1000}) {
    const std::vector<Judged> stray{entry(metric, Verdict::met)};
    CHECK(judge_trial(metrics, limited, stray, {}).judgement == Judgement::void_);
    const std::vector<Judged> doubtful{entry(0, Verdict::met), entry(metric, Verdict::missed)};
    CHECK(judge_trial(metrics, limited, doubtful, {}).judgement == Judgement::void_);
  }
}

TEST_CASE("a metric judged twice is met only if no entry says otherwise") {
  const std::vector<Metric> metrics{metric_named("a")};
  const bool limited[]{true};
  const std::vector<Judged> judged{entry(0, Verdict::met), entry(0, Verdict::invalid)};
  CHECK(judge_trial(metrics, limited, judged, {}).judgement == Judgement::void_);
}

TEST_CASE("over all combinations, GO appears only when every limited metric is met and the trial ended by itself") {
  // Three metrics, each about board or jig, limited or not, absent or with one of six verdicts; early end or not.
  constexpr int choices = 2 * 2 * 7;
  int gos = 0;
  int wrong = 0;
  for (int code = 0; code < choices * choices * choices; ++code) {
    std::vector<Metric> metrics;
    bool limited[3]{};
    std::vector<Judged> judged;
    bool board_missed = false;
    bool jig_missed = false;
    bool all_met = true;
    int limits = 0;
    for (int m = 0, rest = code; m < 3; ++m, rest /= choices) {
      const int pick = rest % choices;
      const About about = pick % 2 == 0 ? About::board : About::jig;
      metrics.push_back(metric_named("m", about));
      limited[m] = pick / 2 % 2 == 1;
      limits += limited[m];
      const int v = pick / 4;
      if (v < 6) judged.push_back(entry(m, static_cast<Verdict>(v)));
      board_missed |= v == 1 && about == About::board;
      jig_missed |= v == 1 && about == About::jig;
      all_met &= !limited[m] || v == 0;
    }
    for (const bool early : {false, true}) {
      const Judgement got = judge_trial(metrics, limited, judged, {early, "stopped"}).judgement;
      const bool go = !board_missed && !jig_missed && !early && limits > 0 && all_met;
      const Judgement expected = board_missed ? Judgement::no_go : go ? Judgement::go : Judgement::void_;
      wrong += got != expected;
      gos += got == Judgement::go;
    }
  }
  CHECK(wrong == 0);
  CHECK(gos > 0);
}

TEST_CASE("the big words are GO, NO-GO and VOID") {
  CHECK(word(Judgement::go) == "GO");
  CHECK(word(Judgement::no_go) == "NO-GO");
  CHECK(word(Judgement::void_) == "VOID");
  CHECK(word(Verdict::no_evidence) == "no evidence");
  CHECK(word(Verdict::invalid) == "invalid");
}
