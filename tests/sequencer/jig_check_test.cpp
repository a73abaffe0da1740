// The jig's check on the simulated jig: a sound jig is GO in every part, and each fault is found and named.
#include "sequencer/jig_check.hpp"

#include <doctest/doctest.h>

#include <algorithm>
#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <map>
#include <optional>

#include "sample_trials.hpp"

using namespace jigwright;
using namespace jigwright::test;

namespace {

std::shared_ptr<const ReadyPlan> part(const std::string& file) {
  static std::map<std::string, std::shared_ptr<const ReadyPlan>> read;
  auto& plan = read[file];
  if (plan) return plan;
  Faults faults;
  plan = read_plan(SOURCE_FOLDER "/sample-runs/" + file, faults);
  REQUIRE_MESSAGE(plan, render(faults));
  return plan;
}

TrialEnd check(const std::string& file, std::vector<std::string> faults = {}, std::uint64_t seed = 1,
               std::string serial = {}) {
  const auto plan = part(file);
  asio::io_context io{1};
  const auto clock = make_virtual_clock();
  const auto bench = make_simulated_bench(plan->jig, scenario(), *clock, SimulatedOptions(seed, std::move(faults)));
  REQUIRE(bench != nullptr);
  const auto recorder = make_null_recorder();
  Silent silent;
  Nobody nobody;
  TrialSetup setup;
  setup.origin = Origin::simulated;
  setup.purpose = plan->plan.check.purpose;
  Trials trials(io, *bench, plan, silent, nobody, *recorder, setup);
  std::optional<TrialResult> out;
  if (serial.empty()) serial = plan->plan.check.serial;
  auto one = [&]() -> Task<void> { out.emplace(co_await trials.run(1, serial, "")); };
  asio::co_spawn(io, one(), asio::detached);
  clock->run(io);
  REQUIRE(out.has_value());
  CHECK(out->start.purpose == plan->plan.check.purpose);
  CHECK(out->end.safe_state == "");
  return out->end;
}

/// "released (K27, load 1 nF)": metrics that were missed, or gave nothing where asked for.
std::vector<std::string> bad(const TrialEnd& end, bool missed_only = true) {
  std::vector<std::string> out;
  for (const FindingRow& row : end.findings) {
    const bool missed = row.judged.verdict == Verdict::missed;
    const bool none = row.judged.verdict == Verdict::invalid || row.judged.verdict == Verdict::unsure;
    if (missed || (none && !missed_only))
      out.push_back(row.metric.name.name +
                    (row.metric.name.variant.empty() ? "" : " (" + row.metric.name.variant + ")"));
  }
  return out;
}

using Words = std::vector<std::string>;

std::string why(const TrialEnd& end) {
  std::string out = end.outcome.void_reason;
  for (const FindingRow& row : end.findings)
    if (row.judged.verdict == Verdict::missed || row.judged.verdict == Verdict::invalid)
      out += "\n  " + label(row.metric.name) + " = " + format_quantity(row.judged.finding.value, row.metric.unit) +
             " [" +
             (row.limit && row.limit->applied.low ? format_quantity(*row.limit->applied.low, row.metric.unit) : "") +
             ", " +
             (row.limit && row.limit->applied.high ? format_quantity(*row.limit->applied.high, row.metric.unit) : "") +
             "] " + std::string(word(row.judged.verdict));
  return out;
}

}  // namespace

TEST_CASE("a sound jig passes its check with twenty seeds, and finds the reject sample at its load") {
  for (std::uint64_t seed = 1; seed <= 20; ++seed) {
    INFO("seed " << seed);
    for (const char* file : {"jig-check.toml", "empty.toml", "reference.toml"}) {
      const TrialEnd end = check(file, {}, seed);
      CHECK_MESSAGE(end.outcome.judgement == Judgement::go, file << ": " << why(end));
    }
    const TrialEnd reject = check("reject.toml", {}, seed);
    CHECK_MESSAGE(reject.outcome.judgement == Judgement::no_go, why(reject));
    const Words at_load{"load_delta (3.3 nF at 0 V)", "detector (3.3 nF at 0 V)"};
    CHECK_MESSAGE(bad(reject) == at_load, why(reject));
  }
}

TEST_CASE("a relay that the copper short tells is named, welded or never closing") {
  const Jig& jig = *part("jig-check.toml")->jig;
  for (const Relay& r : jig.relays) {
    const bool told = r.role == Role::probe_loop || role_name(r.role).starts_with("meter");
    if (!told) continue;
    for (const char* fault : {"relay-welded:", "relay-open:"}) {
      const TrialEnd end = check("jig-check.toml", {fault + r.id});
      INFO(fault << r.id << ": " << why(end));
      CHECK(end.outcome.judgement == Judgement::void_);
      CHECK(bad(end) ==
            Words{"change (" + r.id + ", " + std::string(role_name(r.role)) + (r.of.empty() ? "" : " ") + r.of + ")"});
    }
  }
}

TEST_CASE("a relay that the reference board tells is named, welded or never closing") {
  const Jig& jig = *part("reference.toml")->jig;
  for (const Relay& r : jig.relays) {
    const bool told = r.role == Role::bleed || r.role == Role::input_short || r.role == Role::tone_to_output ||
                      r.role == Role::source_to_input || r.role == Role::detector_to_output || r.role == Role::range;
    if (!told) continue;
    for (const char* fault : {"relay-welded:", "relay-open:"}) {
      const TrialEnd end = check("reference.toml", {fault + r.id});
      INFO(fault << r.id << ": " << why(end));
      CHECK(end.outcome.judgement == Judgement::void_);
      CHECK(bad(end) ==
            Words{"change (" + r.id + ", " + std::string(role_name(r.role)) + (r.of.empty() ? "" : " ") + r.of + ")"});
    }
  }
}

TEST_CASE("a load that is missing, off, leaky, in series with more, or whose relay sticks, is named") {
  const Jig& jig = *part("reference.toml")->jig;
  for (const Relay& r : jig.relays) {
    if (r.role != Role::load) continue;
    const std::string name = " (" + r.id + ", load " + r.of + ")";
    for (const std::string& fault : {"load-missing:" + r.of, "load-off:" + r.of, "relay-open:" + r.id,
                                     "load-leaky:" + r.of, "relay-welded:" + r.id}) {
      const TrialEnd end = check("reference.toml", {fault});
      INFO(fault << ": " << why(end));
      CHECK(end.outcome.judgement == Judgement::void_);
      const auto missed = bad(end);
      const std::string metric = fault.starts_with("load-leaky")     ? "leakage"
                                 : fault.starts_with("relay-welded") ? "released"
                                                                     : "capacitance";
      CHECK(std::count(missed.begin(), missed.end(), metric + name) == 1);
      for (const std::string& m : missed) CHECK((m == "stray" || m.ends_with(name)));
    }
  }
}

TEST_CASE("ten ohm in series are seen with the loads whose reactance does not hide them") {
  for (const char* load : {"100 nF", "1 uF", "10 uF"}) {
    const TrialEnd end = check("reference.toml", {std::string("load-series:") + load});
    INFO(load << ": " << why(end));
    const auto missed = bad(end);
    CHECK(std::any_of(missed.begin(), missed.end(), [&](const std::string& m) {
      return m.starts_with("series") && m.ends_with(std::string("load ") + load + ")");
    }));
  }
}

TEST_CASE("an open probe is named on copper and on the reference board") {
  for (const Probe& p : part("jig-check.toml")->jig->probes) {
    const TrialEnd end = check("jig-check.toml", {"probe-open:" + p.id});
    INFO(p.id << ": " << why(end));
    const auto missed = bad(end);
    CHECK(std::any_of(missed.begin(), missed.end(),
                      [&](const std::string& m) { return m.ends_with("probe loop " + p.id + ")"); }));
  }
}

TEST_CASE("a zero that is off is found, and its path or the meter named") {
  for (const auto& [relay, path] : {std::pair<std::string, std::string>{"K10", "output"},
                                    {"K12", "input"},
                                    {"K13", "rail +"},
                                    {"K14", "rail -"},
                                    {"K15", "identity"}})
    CHECK((bad(check("jig-check.toml", {"relay-warm:" + relay})) == Words{"path_zero (" + path + ")"}));
  const auto missed = bad(check("jig-check.toml", {"meter-zero"}));
  CHECK((missed == Words{"meter_zero", "reference_error"}));
}

TEST_CASE("a source that gives nothing is named, and not its relays") {
  CHECK((bad(check("reference.toml", {"source-off"})) == Words{"source"}));
}

TEST_CASE("a wrong meter, or one that repeats itself, fails the check on copper") {
  for (const char* fault : {"meter-wrong", "meter-stuck"}) {
    const TrialEnd end = check("jig-check.toml", {fault});
    CHECK(end.outcome.judgement == Judgement::void_);
    CHECK_FALSE(bad(end).empty());
  }
}

TEST_CASE("an empty nest, or the wrong thing in it, passes no part") {
  for (const char* file : {"jig-check.toml", "empty.toml", "reference.toml", "reject.toml"})
    for (const char* serial : {"CHECK-EMPTY", "CHECK-COPPER", "CHECK-0001"}) {
      if (part(file)->plan.check.serial == serial) continue;
      const TrialEnd end = check(file, {}, 1, serial);
      INFO(file << " with " << serial << ": " << why(end));
      CHECK(judge_part(part(file)->plan.check, end, true).verdict != PartVerdict::met);
    }
}

TEST_CASE("a silent instrument is VOID without a miss") {
  for (const char* fault : {"meter-silent-after=20", "relays-silent-after=30", "source-silent", "detector-silent"}) {
    asio::io_context io;
    const auto plan = part("reference.toml");
    const TrialEnd end = [&] {
      const auto clock = make_virtual_clock();
      const auto bench = make_simulated_bench(plan->jig, scenario(), *clock, SimulatedOptions(1, {fault}));
      const auto recorder = make_null_recorder();
      Silent silent;
      Nobody nobody;
      TrialSetup setup;
      setup.origin = Origin::simulated;
      Trials trials(io, *bench, plan, silent, nobody, *recorder, setup);
      std::optional<TrialResult> out;
      auto one = [&]() -> Task<void> { out.emplace(co_await trials.run(1, "CHECK-0001", "")); };
      asio::co_spawn(io, one(), asio::detached);
      clock->run(io);
      return out->end;
    }();
    INFO(fault);
    CHECK(end.outcome.judgement == Judgement::void_);
    CHECK(bad(end).empty());
  }
}

namespace {

JigCheckPart reject_part() {
  JigCheckPart p;
  p.purpose = Purpose::reject_sample;
  p.must_miss = "sweep";
  p.load = "1 nF";
  return p;
}

TrialEnd missing(Judgement judgement, const std::vector<MetricName>& missed) {
  TrialEnd end;
  end.outcome.judgement = judgement;
  for (const MetricName& name : missed) {
    FindingRow row;
    row.metric.name = name;
    row.judged.verdict = Verdict::missed;
    end.findings.push_back(row);
  }
  return end;
}

}  // namespace

TEST_CASE("a reject sample is found only by NO-GO at its load and nowhere else") {
  const JigCheckPart part = reject_part();
  const MetricName there{"sweep", "load_delta", "1 nF at 0 V"};
  const auto verdict = [&](Judgement j, const std::vector<MetricName>& m) {
    return judge_part(part, missing(j, m), true).verdict;
  };
  CHECK(verdict(Judgement::no_go, {there}) == PartVerdict::met);
  CHECK(verdict(Judgement::go, {}) == PartVerdict::failed);
  CHECK(verdict(Judgement::void_, {}) == PartVerdict::in_doubt);
  CHECK(verdict(Judgement::no_go, {{"sweep", "load_delta", "1 nF2 at 0 V"}}) == PartVerdict::failed);
  CHECK(verdict(Judgement::no_go, {there, {"sweep", "load_delta", "10 nF at 0 V"}}) == PartVerdict::failed);
  CHECK(verdict(Judgement::no_go, {there, {"offset", "offset", "1 nF at 0 V"}}) == PartVerdict::failed);
  CHECK(judge_part(part, missing(Judgement::no_go, {there}), false).verdict == PartVerdict::in_doubt);
}

TEST_CASE("another part is met by a recorded GO in a confirmed safe state alone") {
  JigCheckPart part;
  part.purpose = Purpose::reference_board;
  TrialEnd end = missing(Judgement::go, {});
  CHECK(judge_part(part, end, true).verdict == PartVerdict::met);
  CHECK(judge_part(part, end, false).verdict == PartVerdict::in_doubt);
  end.safe_state = "loads discharged";
  CHECK(judge_part(part, end, true).verdict == PartVerdict::failed);
  const PartSays says = judge_part(part, missing(Judgement::void_, {{"loads", "released", "K27, load 1 nF"}}), true);
  CHECK(says.verdict == PartVerdict::failed);
  CHECK(says.why == "loads: released (K27, load 1 nF)");
}

TEST_CASE("the sample's check has four parts, and says what it can't tell") {
  Faults faults;
  const CheckPlans plans = read_check_plans(SOURCE_FOLDER "/sample-runs/jig-check.toml", faults);
  REQUIRE_MESSAGE(plans.size() == 4, render(faults));
  CHECK(plans[0]->plan.check.purpose == Purpose::jig_check);
  CHECK(plans[1]->plan.check.purpose == Purpose::jig_check);
  CHECK(plans[2]->plan.check.purpose == Purpose::reference_board);
  CHECK(plans[3]->plan.check.purpose == Purpose::reject_sample);
  CHECK((untold(plans) == Words{"K22, supply to board", "series resistance of 100 pF, 330 pF, 1 nF, 3.3 nF, 10 nF"}));
}

TEST_CASE("a plan that is no part of a check is a fault") {
  Faults faults;
  CHECK(read_check_plans(SOURCE_FOLDER "/sample-runs/plan-a.toml", faults).empty());
  CHECK(render(faults).find("plan \"bridge-amplifier-a\" is no part of a jig's check") != std::string::npos);
}
