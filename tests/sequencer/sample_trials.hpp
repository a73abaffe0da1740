// The sample's plan B on the simulated jig, for tests of whole trials.
#pragma once
#include <doctest/doctest.h>

#include <memory>
#include <string>

#include "fixtures/simulated/simulated_bench.hpp"
#include "sequencer/trial.hpp"

namespace jigwright::test {

struct Nobody final : Person {
  Task<Result<Reading>> ask(int, const Ask&, Duration) override {
    co_return Error{Error::Kind::person, "nobody", {}, {}};
  }
};

struct Silent : Observer {
  void trial_started(int, const TrialStart&) override {}
  void setting_started(const Progress&, const std::string&, const Setting&) override {}
  void reading(const Progress&, const Setting&, const Reading&) override {}
  void finding(int, const Metric&, const Limit*, const Judged&) override {}
  void trial_ended(int, const TrialStart&, const TrialEnd&, const std::string&, const Error*) override {}
  void notice(int, const std::string&) override {}
};

/// The sample's plan, read once.
inline const std::shared_ptr<const ReadyPlan>& plan_b() {
  static const auto plan = [] {
    Faults faults;
    auto read = read_plan(SOURCE_FOLDER "/sample-runs/plan-b.toml", faults);
    REQUIRE_MESSAGE(read, render(faults));
    return read;
  }();
  return plan;
}

inline const std::shared_ptr<const Scenario>& scenario() {
  static const auto read = [] {
    Faults faults;
    auto s = read_scenario(*plan_b()->jig, faults);
    REQUIRE_MESSAGE(s, render(faults));
    return s;
  }();
  return read;
}

/// The same plan on a jig with this many nests.
inline std::shared_ptr<ReadyPlan> with_nests(int nests) {
  auto jig = std::make_shared<Jig>(*plan_b()->jig);
  jig->nests = nests;
  auto out = std::make_shared<ReadyPlan>();
  Faults faults;
  const auto source = read_source(SOURCE_FOLDER "/sample-runs/plan-b.toml");
  REQUIRE(source.ok());
  const auto root = parse_toml(source.value(), faults);
  REQUIRE(root);
  out->jig = jig;
  out->plan = read_plan_tree(*root, SOURCE_FOLDER "/sample-runs/", jig, faults);
  out->limits = plan_b()->limits;
  out->full = expand_plan(out->plan, *jig, out->limits, Depth::full, faults);
  REQUIRE_FALSE(faults.any());
  return out;
}

}  // namespace jigwright::test
