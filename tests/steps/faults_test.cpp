// What a person reads when a step's table is wrong: the input beside the exact message.
#include "tests/steps/bench_top.hpp"

using namespace jigwright;
using namespace jigwright::bench_top;

namespace {

std::string report(std::string_view kind, const std::string& keys, std::shared_ptr<const Jig> jig = sample_jig()) {
  return read_step(kind, keys, std::move(jig)).report();
}

std::shared_ptr<const Jig> jig_without(Role role, const std::string& of = {}) {
  auto jig = std::make_shared<Jig>(*sample_jig());
  std::erase_if(jig->relays, [&](const Relay& r) { return r.role == role && r.of == of; });
  return jig;
}

bool says(const std::string& text, std::string_view part) {
  INFO(text);
  const bool found = text.find(part) != std::string::npos;
  CHECK_MESSAGE(found, "looked for: " << part);
  return found;
}

}  // namespace

TEST_CASE("a load that lacks its unit is pointed at, and the right one named") {
  CHECK(report("offset-under-load", "range = \"x100\"\nloads = [\"open\", \"100 pF\", \"100n\"]\n") ==
        R"(plan.toml:2:28: step "s": load "100n" is not on this jig
  loads = ["open", "100 pF", "100n"]
                             ^^^^^^
  the jig has: open, 100 pF, 330 pF, 1 nF, 3.3 nF, 10 nF, 100 nF, 1 uF, 10 uF; write "100 nF"
)");
}

TEST_CASE("a load of the same capacitance in other words is suggested") {
  says(report("offset-under-load", "range = \"x100\"\nloads = [\"1000 nF\"]\n"), "write \"1 uF\"");
  says(report("offset-under-load", "range = \"x100\"\nloads = [\"0.01 uF\"]\n"), "write \"10 nF\"");
  says(report("offset-under-load", "range = \"x100\"\nloads = [\"3.27 nF\"]\n"), "write \"3.3 nF\"");
  says(report("offset-under-load", "range = \"x100\"\nloads = [\"opne\"]\n"), "write \"open\"");
}

TEST_CASE("a contact step that leaves out a probe is a fault that says which") {
  CHECK(report("contact", "probes = [\"GND\", \"OUT\", \"IN+\", \"IN-\", \"+V\", \"-V\", \"RS1\"]\n") ==
        R"(plan.toml:1:10: step "s": "probes" leaves out: ID, RS2
  probes = ["GND", "OUT", "IN+", "IN-", "+V", "-V", "RS1"]
           ^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^
  an open probe looks like a perfect board: name every probe of the jig, or leave the key out
)");
}

TEST_CASE("a probe without its loop relay is a fault") {
  says(report("contact", "", jig_without(Role::probe_loop, "OUT")),
       "probe \"OUT\" has no relay with role \"probe loop\"");
}

TEST_CASE("an unknown range names the board's") {
  CHECK(report("offset", "ranges = [\"x1\", \"x1000\"]\n") ==
        R"(plan.toml:1:17: step "s": range "x1000" is not one of this board's
  ranges = ["x1", "x1000"]
                  ^^^^^^^
  the board has: x1, x10, x100; write "x100"
)");
}

TEST_CASE("two ranges without a relay can't be told apart") {
  says(report("offset", "", jig_without(Role::range, "x10")), "has no relay on this jig, nor has range");
}

TEST_CASE("a role that the jig lacks is named, with those it has") {
  const std::string text =
      report("offset-under-load", "range = \"x100\"\nloads = \"1 nF\"\n", jig_without(Role::tone_to_output));
  says(text, "the jig has no relay with role \"tone to output\"");
  says(text, "the jig's relays have the roles: probe loop, meter to output");
  says(report("known-value", "", jig_without(Role::meter_to_zero)), "role \"meter to zero\"");
  says(report("identity", "resistor = \"4.99 kohm\"\ntolerance = \"2 %\"\n", jig_without(Role::meter_to_identity)),
       "role \"meter to identity\"");
  says(report("power-up", "", jig_without(Role::meter_to_rail_neg)), "role \"meter to rail -\"");
  says(report("gain", "outputs = [\"-8 V\", \"8 V\"]\n", jig_without(Role::source_to_input)),
       "role \"source to input\"");
}

TEST_CASE("gain wants levels of both polarities within the board's swing, once each") {
  says(report("gain", ""), "\"outputs\" is missing");
  says(report("gain", "outputs = [\"4 V\", \"8 V\"]\n"), "\"outputs\" needs levels of both polarities");
  says(report("gain", "outputs = [\"-8 V\"]\n"), "\"outputs\" needs levels of both polarities");
  says(report("gain", "outputs = [\"-8 V\", \"8 V\", \"8 V\"]\n"), "output level +8 V is named twice");
  CHECK(report("gain", "outputs = [\"-8 V\", \"11 V\"]\n") ==
        R"(plan.toml:1:20: step "s": output level +11 V is beyond the board's swing
  outputs = ["-8 V", "11 V"]
                     ^^^^^^
  stay within +-10 V
)");
}

TEST_CASE("a level that the source can't make is a fault") {
  BoardFacts board = sample_board();
  board.ranges = {{"x1", 0.5, {}}};
  says(read_step("gain", "outputs = [\"-8 V\", \"4 V\"]\n", sample_jig(), board).report(),
       "output level -8 V needs -16 V from the source");
}

TEST_CASE("a missing or a second identity is a fault") {
  says(report("identity", "tolerance = \"2 %\"\n"), "needs either \"resistor\" or \"voltage\"");
  says(report("identity", "resistor = \"1 kohm\"\nvoltage = \"1 V\"\ntolerance = \"2 %\"\n"), "needs either");
  says(report("identity", "resistor = \"4.99 Mohm\"\ntolerance = \"2 %\"\n"), "the meter's largest range is 100 kohm");
  says(report("identity", "resistor = \"4.99 kohm\"\n"), "\"tolerance\" is missing");
}

TEST_CASE("m for M is suspected in a resistor") {
  says(report("identity", "resistor = \"4.99 mohm\"\ntolerance = \"2 %\"\n"), "for mega write M");
}

TEST_CASE("loads without proof want a reason, and are warned of") {
  const std::string keys = "range = \"x100\"\nloads = \"1 nF\"\nprove = false\n";
  says(report("offset-under-load", keys), "prove = false wants a reason");
  const ReadStep read = read_step("offset-under-load", keys + "prove_reason = \"no tone on this jig\"\n");
  CHECK_FALSE(read.faults.any());
  CHECK(read.faults.count(Severity::warning) == 1);
}

TEST_CASE("a stable rule that can't be met, or beside a count, is a fault") {
  const std::string keys = "range = \"x100\"\nloads = \"1 nF\"\n";
  says(report("offset-under-load", keys + "stable = { window = 9, tolerance = \"20 uV\", max = 5 }\n"),
       "at most 5 readings never fill a window of 9");
  says(report("offset-under-load", keys + "readings = 5\nstable = { window = 5, tolerance = \"20 uV\" }\n"),
       "has both \"readings\" and \"stable\"");
  says(report("offset-under-load", keys + "stable = { windows = 5 }\n"), "unknown key \"windows\"");
}

TEST_CASE("a load twice, none at all, or one for power-up that is not swept") {
  says(report("offset-under-load", "range = \"x100\"\nloads = [\"1 nF\", \"1 nF\"]\n"), "load \"1 nF\" is named twice");
  says(report("offset-under-load", "range = \"x100\"\nloads = [\"open\"]\n"), "\"loads\" names no load but open");
  says(report("offset-under-load", "range = \"x100\"\nloads = \"1 nF\"\npower_up_loads = [\"1 uF\"]\n"),
       "load \"1 uF\" is not among this step's loads");
  says(report("offset-under-load", "range = \"x100\"\nloads = \"1 nF\"\n", jig_without(Role::load, "1 nF")),
       "load \"1 nF\" has no relay on this jig");
}

TEST_CASE("a part of a mains cycle is warned of, nonsense refused") {
  says(report("offset", "integration_cycles = 0.1\n"), "mains hum stays in the readings");
  says(report("offset", "integration_cycles = 0\n"), "expected a number of mains cycles");
  says(report("offset", "integration_cycles = \"1\"\n"), "expected a number of mains cycles");
}

TEST_CASE("a question without an answer, or with bounds of two units, is a fault") {
  says(report("question", "ask = \"Lit?\"\n"), "needs \"answer\", or both \"low\" and \"high\"");
  says(report("question", "ask = \"Lit?\"\nlow = \"1 V\"\nhigh = \"2 A\"\n"), "write both with the same unit");
  says(report("question", "ask = \"Lit?\"\nlow = \"2 V\"\nhigh = \"1 V\"\n"), "\"high\" is less than \"low\"");
  says(report("question", "ask = \"Lit?\"\nanswer = \"yse\"\n"), "write \"yes\"");
  says(report("question", "answer = \"yes\"\n"), "\"ask\" is missing");
}

TEST_CASE("a misspelt key finds its neighbour in every kind") {
  says(report("contact", "mx = \"5 ohm\"\n"), "unknown key \"mx\"");
  says(report("offset", "raedings = 5\n"), "write readings");
  says(report("supply-current", "reading = 5\n"), "write readings");
  says(report("power-up", "rail_setle = \"5 ms\"\n"), "write rail_settle");
}

TEST_CASE("a step with faults expands to nothing") {
  const ReadStep read = read_step("offset-under-load", "range = \"x100\"\nloads = [\"7 nF\"]\n");
  REQUIRE(read.faults.any());
  CHECK(read.step->expand(Depth::full).settings.empty());
  CHECK(read.step->reduce(Depth::full, {}, {}).empty());
}
