// What every kind lays out, whatever it reads.
#include <algorithm>
#include <set>

#include "tests/steps/bench_top.hpp"

using namespace jigwright;
using namespace jigwright::bench_top;

namespace {

struct KindSample {
  const char* kind;
  std::string keys;
};

std::vector<KindSample> all_kinds() {
  return {{"known-value", ""},
          {"contact", ""},
          {"identity", "resistor = \"4.99 kohm\"\ntolerance = \"2 %\"\n"},
          {"power-up", ""},
          {"supply-current", ""},
          {"offset", "reverse = true\n"},
          {"gain", "outputs = [\"-8 V\", \"-4 V\", \"4 V\", \"8 V\"]\n"},
          {"offset-under-load", under_load_keys},
          {"question", "ask = \"Is the lamp lit?\"\nanswer = \"yes\"\n"},
          {"relay-check", "nest = \"board\"\n"},
          {"path-zero", ""},
          {"source-check", "levels = [\"-1 V\", \"1 V\"]\n"},
          {"load-check", ""}};
}

std::vector<std::string> ids(const Expansion& e) {
  std::vector<std::string> out;
  for (const Setting& s : e.settings) out.push_back(s.id);
  return out;
}

}  // namespace

TEST_CASE("every kind in the table reads its sample without a fault") {
  CHECK(all_kinds().size() == step_kinds().size());
  for (const auto& k : all_kinds()) {
    const ReadStep read = read_step(k.kind, k.keys);
    INFO(k.kind << "\n" << read.report());
    CHECK_FALSE(read.faults.any());
    CHECK_FALSE(read.step->expand(Depth::full).settings.empty());
    CHECK_FALSE(read.step->expand(Depth::full).metrics.empty());
  }
}

TEST_CASE("setting ids and metric names are unique, and carry the step") {
  for (const auto& k : all_kinds()) {
    const Expansion e = read_step(k.kind, k.keys).step->expand(Depth::full);
    std::set<std::string> seen, named;
    for (const Setting& s : e.settings) {
      CHECK(seen.insert(s.id).second);
      CHECK(s.id.starts_with("s/"));
      CHECK_FALSE(s.shown.empty());
      CHECK(s.step == 3);
    }
    for (const Metric& m : e.metrics) {
      CHECK(m.name.step == "s");
      CHECK(named.insert(label(m.name)).second);
    }
  }
}

TEST_CASE("a setting's position is its place in the step's list") {
  for (const auto& k : all_kinds()) {
    const Expansion e = read_step(k.kind, k.keys).step->expand(Depth::full);
    for (std::size_t i = 0; i < e.settings.size(); ++i) CHECK(e.settings[i].position == static_cast<int>(i));
  }
}

TEST_CASE("what is powered closes the supply's relay and carries the board's rails and current limit") {
  for (const auto& k : all_kinds()) {
    const Expansion e = read_step(k.kind, k.keys).step->expand(Depth::full);
    for (const Setting& s : e.settings) {
      INFO(s.id);
      if (s.phase != Phase::powered) {
        CHECK_FALSE(s.supply.on());
        CHECK_FALSE(closed(s, Role::supply_to_board));
        continue;
      }
      CHECK(closed(s, Role::supply_to_board));
      if (s.supply.on()) CHECK(s.supply == SupplyState{12, 0.06});
    }
  }
}

TEST_CASE("bus relays join shared instruments and nothing else does, and all that are joined are leased") {
  const Jig& jig = *sample_jig();
  for (const auto& k : all_kinds()) {
    const Expansion e = read_step(k.kind, k.keys).step->expand(Depth::full);
    for (const Setting& s : e.settings) {
      INFO(s.id);
      CHECK((s.own & s.bus).none());
      for (std::size_t i = 0; i < jig.relays.size(); ++i) {
        const std::string name(role_name(jig.relays[i].role));
        const bool shared = name.starts_with("meter") || name.ends_with("to output") || name == "source to input" ||
                            name == "probe loop";
        if (s.own[i]) CHECK_FALSE(shared);
        if (s.bus[i]) CHECK(shared);
      }
      if (closed(s, Role::meter_to_output)) CHECK((s.resources & use_meter) != 0);
      if (closed(s, Role::detector_to_output)) CHECK((s.resources & use_detector) != 0);
      if (closed(s, Role::source_to_input) || closed(s, Role::tone_to_output)) CHECK((s.resources & use_source) != 0);
    }
  }
}

TEST_CASE("the source drives only where a relay carries it") {
  for (const auto& k : all_kinds()) {
    // A relay that must be open is told open only while the source drives; its tone relay carries DC as well.
    if (k.kind == std::string("relay-check")) continue;
    const Expansion e = read_step(k.kind, k.keys).step->expand(Depth::full);
    for (const Setting& s : e.settings) {
      if (s.source.dc_V != 0) CHECK(closed(s, Role::source_to_input));
      if (s.source.tone_V != 0) CHECK(closed(s, Role::tone_to_output));
      CHECK_FALSE((closed(s, Role::source_to_input) && closed(s, Role::input_short)));
    }
  }
}

TEST_CASE("contact and known values come before anything else, identity and proofs before power") {
  for (const auto& k : all_kinds()) {
    const Expansion e = read_step(k.kind, k.keys).step->expand(Depth::full);
    const std::string kind = k.kind;
    const bool first = kind == "contact" || kind == "known-value" || kind == "relay-check" || kind == "path-zero";
    for (const Setting& s : e.settings) {
      CHECK((s.phase == Phase::contact) == first);
      if (kind == "identity") CHECK(s.phase == Phase::unpowered);
      if (starts_with(s, "s/proof/") || starts_with(s, "s/resistance")) CHECK(s.phase == Phase::unpowered);
      if (kind == "offset" && starts_with(s, "s/zero")) CHECK(s.phase == Phase::unpowered);
    }
  }
}

TEST_CASE("the longest time of a setting is not less than the usual one, and holds its readings") {
  for (const auto& k : all_kinds()) {
    const Expansion e = read_step(k.kind, k.keys).step->expand(Depth::full);
    for (const Setting& s : e.settings) {
      CHECK(s.worst_s >= s.usual_s);
      CHECK(s.usual_s >= s.settle_s);
      if (const auto* meter = std::get_if<ReadMeter>(&s.act))
        CHECK(s.worst_s >= s.settle_s + most_readings(s.stop) * meter->setup.integration_s);
    }
  }
}

TEST_CASE("every probe of the jig has its loop read, with a bound of the step's own") {
  const Expansion e = read_step("contact", "").step->expand(Depth::full);
  REQUIRE(e.settings.size() > sample_jig()->probes.size());
  for (std::size_t i = 0; i < sample_jig()->probes.size(); ++i) {
    CHECK(closed(e.settings[i], Role::probe_loop, sample_jig()->probes[i].id));
    CHECK(std::get<ReadMeter>(e.settings[i].act).setup.function == MeterFunction::resistance);
    CHECK(std::get<ReadMeter>(e.settings[i].act).setup.range == 100);
    CHECK(e.metrics[i].own_high == 5.0);
    CHECK(e.metrics[i].about == About::jig);
  }
}

TEST_CASE("the meter's paths to output and input are read in ohm after the probes, before power") {
  const Expansion e = read_step("contact", "").step->expand(Depth::full);
  const std::size_t n = sample_jig()->probes.size();
  REQUIRE(e.settings.size() == n + 2);
  CHECK(closed(e.settings[n], Role::meter_to_output));
  CHECK(std::get<ReadMeter>(e.settings[n].act).setup.range == 100e3);  // the board states 22 kohm
  CHECK(e.metrics[n].own_high == 66e3);
  CHECK(closed(e.settings[n + 1], Role::meter_to_input));
  CHECK(closed(e.settings[n + 1], Role::input_short));
  for (std::size_t i = n; i < n + 2; ++i) {
    CHECK(e.settings[i].phase == Phase::contact);
    CHECK(std::get<ReadMeter>(e.settings[i].act).setup.function == MeterFunction::resistance);
    CHECK(e.metrics[i].about == About::jig);
  }
}

TEST_CASE("gain visits its levels symmetrically in time, in an order that stands") {
  const Expansion e = read_step("gain", "ranges = [\"x10\"]\noutputs = [\"-8 V\", \"-4 V\", \"4 V\", \"8 V\"]\n")
                          .step->expand(Depth::full);
  REQUIRE(e.settings.size() == 16);
  const std::size_t last = e.settings.size() - 1;
  for (std::size_t i = 0; i < e.settings.size(); ++i) {
    CHECK(e.settings[i].source == e.settings[last - i].source);
    CHECK(closed(e.settings[i], Role::meter_to_input) == closed(e.settings[last - i], Role::meter_to_input));
    if (i > 0) CHECK(e.settings[i].group > e.settings[i - 1].group);
  }
  CHECK(e.settings[0].source.dc_V == doctest::Approx(-0.8));
  CHECK(e.settings[7].source.dc_V == doctest::Approx(0.8));
}

TEST_CASE("open readings stand before, between and after blocks of loads, and no load is without both") {
  const Expansion e = read_step("offset-under-load", under_load_keys).step->expand(Depth::full);
  std::vector<std::string> order;
  for (const Setting& s : e.settings)
    if (s.phase == Phase::powered && s.id.ends_with("/0 V/dc")) order.push_back(s.id.substr(2, s.id.size() - 9));
  CHECK(order == std::vector<std::string>{"open 1", "100 pF", "330 pF", "1 nF", "3.3 nF", "open 2", "10 nF", "100 nF",
                                          "1 uF", "10 uF", "open 3"});
  const auto group = [&](const char* id) { return setting(e, id).group; };
  CHECK(group("s/open 1/0 V/dc") < group("s/100 pF/0 V/dc"));
  CHECK(group("s/100 pF/0 V/dc") == group("s/3.3 nF/0 V/dc"));
  CHECK(group("s/3.3 nF/0 V/dc") < group("s/open 2/0 V/dc"));
  CHECK(group("s/open 2/0 V/dc") < group("s/10 nF/0 V/dc"));
  CHECK(group("s/10 uF/0 V/dc") < group("s/open 3/0 V/dc"));
  CHECK(group("s/open 3/0 V/dc") < group("s/open 1/+5 V/dc"));
}

TEST_CASE("bracket_every = 0 reads open before and after all loads only") {
  const Expansion e = read_step("offset-under-load", "range = \"x100\"\nloads = [\"1 nF\", \"10 nF\", \"1 uF\"]\n")
                          .step->expand(Depth::full);
  std::size_t opens = 0;
  for (const Setting& s : e.settings) opens += s.id.starts_with("s/open ") && s.id.ends_with("/dc");
  CHECK(opens == 2);
}

TEST_CASE("adding a load leaves every other setting and metric its name") {
  const auto with = [](const std::string& loads) {
    return read_step("offset-under-load", "range = \"x100\"\nbracket_every = 2\nloads = " + loads)
        .step->expand(Depth::full);
  };
  const Expansion few = with("[\"100 pF\", \"1 nF\", \"10 nF\"]");
  const Expansion more = with("[\"100 pF\", \"330 pF\", \"1 nF\", \"10 nF\"]");
  const auto known = ids(more);
  for (const auto& id : ids(few)) CHECK(std::find(known.begin(), known.end(), id) != known.end());
  for (const Metric& m : few.metrics)
    CHECK(std::any_of(more.metrics.begin(), more.metrics.end(), [&](const Metric& o) { return o.name == m.name; }));
}

TEST_CASE("meter and detector both stay on the output, so that the total load is the same for both") {
  const Expansion e = read_step("offset-under-load", under_load_keys).step->expand(Depth::full);
  for (const Setting& s : e.settings) {
    if (s.phase != Phase::powered) continue;
    CHECK(closed(s, Role::meter_to_output));
    CHECK(closed(s, Role::detector_to_output));
  }
}

TEST_CASE("a larger load settles longer, by its time constant and its charge") {
  const Expansion e = read_step("offset-under-load", under_load_keys).step->expand(Depth::full);
  // 10 uF of 9.94 uF through 60 + 0.08 + 0.03 ohm, 10 V to 5 uV: 14.5 time constants; charge 9.94 uF * 10 V / 15 mA.
  const double expected_s = 2e-3 + 60.11 * 9.940165e-6 * std::log(10 / 5e-6) + 9.940165e-6 * 10 / 0.015;
  CHECK(setting(e, "s/10 uF/0 V/dc").settle_s == doctest::Approx(expected_s).epsilon(1e-4));
  CHECK(setting(e, "s/100 pF/0 V/dc").settle_s < 2.2e-3);
}

TEST_CASE("a power-up with a load goes off, on with the load, and the same without it") {
  const Expansion e = read_step("offset-under-load", under_load_keys).step->expand(Depth::full);
  const Setting& off = setting(e, "s/power-up/1 nF/loaded/off");
  const Setting& on = setting(e, "s/power-up/1 nF/loaded/on");
  CHECK_FALSE(off.supply.on());
  CHECK(closed(off, Role::load, "1 nF"));
  CHECK(on.supply.on());
  CHECK(closed(on, Role::load, "1 nF"));
  CHECK(on.settle_s >= 0.3);
  CHECK_FALSE(setting(e, "s/power-up/1 nF/open/off").supply.on());
  CHECK_FALSE(closed(setting(e, "s/power-up/1 nF/open/dc"), Role::load, "1 nF"));
  CHECK(off.group < on.group);
  CHECK(on.group < setting(e, "s/power-up/1 nF/loaded/dc").group);
}

TEST_CASE("the short depth keeps the loads that the plan names for it") {
  const ReadStep read = read_step("offset-under-load", under_load_keys + "short_loads = [\"1 nF\", \"10 nF\"]\n");
  REQUIRE_FALSE(read.faults.any());
  const Expansion small = read.step->expand(Depth::shortened);
  const Expansion full = read.step->expand(Depth::full);
  CHECK(small.settings.size() < full.settings.size());
  CHECK_NOTHROW(metric(small, "load_delta", "1 nF at 0 V"));
  for (const Metric& m : small.metrics) CHECK(m.name.variant.find("100 nF") == std::string::npos);
}

TEST_CASE("a tone has time for three of its periods in the detector's dwell") {
  const Expansion e = read_step("offset-under-load", under_load_keys).step->expand(Depth::full);
  for (const Setting& s : e.settings)
    if (s.source.tone_V != 0) CHECK(std::get<ReadDetector>(s.act).dwell_s * s.source.tone_Hz >= 3 - 1e-9);
}

TEST_CASE("a metric whose sound value the step knows says so") {
  const Expansion e = read_step("offset-under-load", under_load_keys).step->expand(Depth::full);
  const auto nominal = [&](const char* name, const char* variant) {
    return e.metrics[static_cast<std::size_t>(metric(e, name, variant))].nominal;
  };
  CHECK(nominal("load_proof", "1 nF") == doctest::Approx(1.012e-9));
  CHECK(nominal("load_proof", "open") == doctest::Approx(65e-12));
  CHECK(nominal("load_delta", "1 nF at +5 V") == 0);
  CHECK(std::isnan(nominal("output", "1 nF at +5 V")));
  const Expansion contact = read_step("contact", "").step->expand(Depth::full);
  CHECK(contact.metrics[0].nominal == 0);
}
