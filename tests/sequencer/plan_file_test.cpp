#include <doctest/doctest.h>

#include <cmath>

#include "sequencer/plan.hpp"

using namespace jigwright;

namespace {

const std::string samples = SOURCE_FOLDER "/sample-runs/";

std::shared_ptr<const ReadyPlan> sample(const std::string& name, Faults& faults) {
  auto plan = read_plan(samples + name, faults);
  INFO(render(faults));
  REQUIRE(plan != nullptr);
  return plan;
}

LimitSet limits_of(const std::string& entry, Faults& faults) {
  SourceText text;
  text.name = "limits.toml";
  text.text =
      "[limits]\nid = \"a\"\nrevision = 3\nreason = \"b\"\nby = \"c\"\n[[limit]]\nstep = \"offset\"\nmetric = "
      "\"offset\"\n" +
      entry;
  const auto root = parse_toml(std::make_shared<const SourceText>(text), faults);
  REQUIRE(root.has_value());
  return read_limits_tree(*root, faults);
}

}  // namespace

TEST_CASE("both sample plans are read without a fault or a warning") {
  for (const char* name : {"plan-a.toml", "plan-b.toml"}) {
    Faults faults;
    sample(name, faults);
    CHECK(faults.count(Severity::fault) == 0);
    CHECK(faults.count(Severity::warning) == 0);
  }
}

TEST_CASE("a plan's values come in SI units, and the files it names are found from its folder") {
  Faults faults;
  const auto ready = sample("plan-b.toml", faults);
  const Plan& plan = ready->plan;
  CHECK(plan.id == "bridge-amplifier-b");
  CHECK(plan.jig_file == samples + "jig.toml");
  CHECK(plan.limits_file == samples + "limits-b.toml");
  CHECK_FALSE(plan.stop_at_first_miss);
  CHECK(plan.time_limit_s == 60);
  CHECK(plan.board.rail_V == 12);
  CHECK(plan.board.output_A == doctest::Approx(0.015));
  CHECK(plan.board.warm_up_s == doctest::Approx(0.3));
  CHECK(plan.board.range("x100")->gain == 100);
}

TEST_CASE("steps keep the plan's order, their kind and the plan's own words for the operator") {
  Faults faults;
  const auto ready = sample("plan-a.toml", faults);
  const Plan& plan = ready->plan;
  REQUIRE(plan.steps.size() == 7);
  REQUIRE(plan.kinds.size() == 7);
  CHECK(plan.steps[1]->id == "contact");
  CHECK(plan.steps[1]->next_action == "Open the lid, reseat the board, and try once more.");
  CHECK(plan.steps[3]->kind == "power-up");
  CHECK(plan.kinds[6]->name == "gain");
  CHECK(plan.steps[3]->next_action.empty());
}

TEST_CASE("plan B asks for the settings, readings and findings that its benchmark counts on") {
  Faults faults;
  const auto ready = sample("plan-b.toml", faults);
  CHECK(ready->full.settings.size() >= 60);
  CHECK(ready->full.readings >= 600);
  CHECK(ready->full.metrics.size() >= 40);
}

TEST_CASE("every limited metric of the sample has a test limit inside its specification") {
  Faults faults;
  const auto ready = sample("plan-b.toml", faults);
  int limited = 0;
  for (const auto& limit : ready->full.limits) {
    if (!limit) continue;
    ++limited;
    if (limit->specification.low) CHECK(*limit->applied.low >= *limit->specification.low);
    if (limit->specification.high) CHECK(*limit->applied.high <= *limit->specification.high);
  }
  CHECK(limited >= 40);
}

TEST_CASE("a plan that is no file is a fault that names it") {
  Faults faults;
  CHECK(read_plan("/nowhere/plan.toml", faults) == nullptr);
  CHECK(render(faults) == "/nowhere/plan.toml: can't read the file: No such file or directory\n  check the path\n");
}

TEST_CASE("a limit is guarded by its budgeted uncertainty unless it says otherwise") {
  Faults faults;
  const auto set =
      limits_of("specification = { low = \"-0.5 mV\", high = \"0.5 mV\" }\nuncertainty = \"20 uV\"\n", faults);
  CHECK(render(faults) == "");
  CHECK(set.revision == 3);
  REQUIRE(set.entries.size() == 1);
  const Limit& limit = set.entries[0].limit;
  CHECK(set.entries[0].unit == Unit::volt);
  CHECK(limit.guard == Guard::uncertainty);
  CHECK(*limit.applied.high == doctest::Approx(0.48e-3));
  CHECK(limit.nominal == doctest::Approx(0));
}

TEST_CASE("a share, an inset, a typed limit and none are read as written") {
  const std::string specification = "specification = { low = \"-0.5 mV\", high = \"0.5 mV\" }\n";
  struct Row {
    const char* text;
    Guard guard;
    double high_V;
  };
  for (const Row& row : {Row{"uncertainty = \"20 uV\"\nshare = 0.5\n", Guard::uncertainty, 0.49e-3},
                         Row{"guard = \"inset\"\ninset = \"0.1 mV\"\n", Guard::inset, 0.4e-3},
                         Row{"guard = \"typed\"\ntest = { low = \"-0.3 mV\", high = \"0.2 mV\" }\nreason = \"r\"\n",
                             Guard::typed, 0.2e-3},
                         Row{"guard = \"none\"\nreason = \"r\"\n", Guard::none, 0.5e-3}}) {
    Faults faults;
    const auto set = limits_of(specification + row.text, faults);
    CHECK(render(faults) == "");
    REQUIRE(set.entries.size() == 1);
    CHECK(set.entries[0].limit.guard == row.guard);
    CHECK(*set.entries[0].limit.applied.high == doctest::Approx(row.high_V));
  }
}

TEST_CASE("a bare number is the limit of a count") {
  Faults faults;
  const auto set = limits_of("specification = { high = 3 }\nguard = \"none\"\nreason = \"r\"\n", faults);
  CHECK(render(faults) == "");
  REQUIRE(set.entries.size() == 1);
  CHECK(set.entries[0].unit == Unit::count);
  CHECK(*set.entries[0].limit.applied.high == 3);
}

TEST_CASE("an entry at fault is left out, the others are kept") {
  Faults faults;
  const auto set = limits_of(
      "specification = { high = \"3\" }\nuncertainty = \"1 V\"\n[[limit]]\nstep = \"gain\"\nmetric = \"gain\"\n"
      "specification = { low = \"0.9 V/V\" }\nuncertainty = \"100 ppm\"\n",
      faults);
  CHECK(faults.count(Severity::fault) == 1);
  REQUIRE(set.entries.size() == 1);
  CHECK(set.entries[0].step == "gain");
}
