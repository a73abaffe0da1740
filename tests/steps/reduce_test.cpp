// What readings say: answers worked by hand.
#include <cmath>

#include "steps/tone_proof.hpp"
#include "tests/steps/bench_top.hpp"

using namespace jigwright;
using namespace jigwright::bench_top;

namespace {

struct Played {
  Expansion expansion;
  std::vector<Finding> findings;
  Finding of(const std::string& name, const std::string& variant = {}) const {
    return finding(expansion, findings, name, variant);
  }
};

Played played(const ReadStep& read, const ValueOf& value_of) {
  INFO(read.report());
  REQUIRE_FALSE(read.faults.any());
  Played out;
  out.expansion = read.step->expand(Depth::full);
  const auto records = play(out.expansion.settings, value_of);
  out.findings = read.step->reduce(Depth::full, records, out.expansion.settings);
  return out;
}

/// The tone's level for what is really at the pad.
double tone_V(const Setting& s, double total_F) {
  ToneFacts facts;
  facts.amplitude_V = s.source.tone_V;
  facts.tone_ohm = 10e3;
  return tone_level(facts, 6875, total_F, s.source.tone_Hz);
}

double load_F(const Setting& s) {
  for (const Load& load : sample_jig()->loads)
    if (closed(s, Role::load, load.id)) return load.capacitance_F;
  return 0;
}

double sound_level(const Setting& s) {
  return s.source.tone_V != 0 ? tone_V(s, 65e-12 + load_F(s)) : 0.3e-3;
}

}  // namespace

TEST_CASE("every metric has its finding once all is played") {
  const std::vector<std::pair<const char*, std::string>> kinds{
      {"known-value", ""},
      {"contact", ""},
      {"identity", "resistor = \"4.99 kohm\"\ntolerance = \"2 %\"\n"},
      {"power-up", ""},
      {"supply-current", ""},
      {"offset", ""},
      {"gain", "outputs = [\"-8 V\", \"8 V\"]\n"},
      {"offset-under-load", under_load_keys},
      {"question", "ask = \"Is the lamp lit?\"\nanswer = \"yes\"\n"}};
  for (const auto& [kind, keys] : kinds) {
    INFO(kind);
    const auto p = played(read_step(kind, keys), [](const Setting& s, double at_s) {
      if (s.source.tone_V != 0) return sound_level(s);
      return s.source.dc_V + 1e-6 * std::sin(at_s * 777);
    });
    CHECK(p.findings.size() == p.expansion.metrics.size());
    for (std::size_t i = 0; i < p.expansion.metrics.size(); ++i) {
      INFO(label(p.expansion.metrics[i].name));
      CHECK(has(p.findings, static_cast<int>(i)));
    }
    for (const Finding& f : p.findings) {
      CHECK(f.state == FindingState::measured);
      CHECK(std::isfinite(f.value));
      CHECK(f.n > 0);
      if (std::string(kind) != "question") CHECK(f.u >= 0);
    }
  }
}

TEST_CASE("the path's zero is subtracted from the offset") {
  const auto p = played(read_step("offset", ""), [](const Setting& s, double) {
    return s.id == "s/zero" ? 25e-6 : s.id == "s/x100" ? 275e-6 : 30e-6;
  });
  CHECK(p.of("path_zero").value == doctest::Approx(25e-6));
  CHECK(p.of("offset", "x100").value == doctest::Approx(250e-6));
  CHECK(p.of("offset", "x1").value == doctest::Approx(5e-6));
  CHECK(p.of("offset", "x100").n == 20);
}

// Common practice, no source: 2.5 uV at the input of a x100 stage is 0.25 mV at its output; 10 ohm at the input of one
// makes 1 mV of each microampere.
TEST_CASE("a x100 stage turns 2.5 uV into 0.25 mV, and a microampere in 10 ohm into 1 mV") {
  const auto stage = [](double input_V) {
    return played(read_step("offset", ""), [=](const Setting& s, double) {
      return closed(s, Role::supply_to_board) && closed(s, Role::range, "x100") ? 100 * input_V : 0.0;
    });
  };
  CHECK(stage(2.5e-6).of("offset", "x100").value == doctest::Approx(0.25e-3));
  CHECK(stage(10.0 * 1e-6).of("offset", "x100").value == doctest::Approx(1e-3));
}

// Common practice, no source: 40 counts of a meter that counts in 100 uV are 4 mV.
TEST_CASE("40 counts of 100 uV are 4 mV, give or take the digit's own uncertainty") {
  Jig coarse = *sample_jig();
  coarse.meter.voltage.front().resolution = 100e-6;
  const auto read =
      read_step("offset", "subtract_zero = false\nranges = [\"x1\"]\n", std::make_shared<const Jig>(coarse));
  const auto p = played(read, [](const Setting&, double) { return 40 * 100e-6; });
  CHECK(p.of("offset", "x1").value == doctest::Approx(4e-3));
  CHECK(p.of("offset", "x1").u > 0.288 * 100e-6);
}

TEST_CASE("reversing the leads takes out what does not turn with them") {
  const double meter_V = 7e-6, path_V = 20e-6, board_V = 90e-6;
  const auto p = played(read_step("offset", "reverse = true\nranges = [\"x10\"]\n"), [&](const Setting& s, double) {
    const double sign = closed(s, Role::meter_reversed) ? -1 : 1;
    return meter_V + sign * (path_V + (s.supply.on() ? board_V : 0));
  });
  CHECK(p.of("path_zero").value == doctest::Approx(path_V));
  CHECK(p.of("offset", "x10").value == doctest::Approx(board_V));
}

TEST_CASE("the zero's age is the mean time from it to the offsets") {
  const ReadStep read = read_step("offset", "ranges = [\"x1\", \"x10\"]\nreadings = 1\n");
  const Expansion e = read.step->expand(Depth::full);
  std::vector<SettingRecord> records;
  const double at_s[] = {10, 14, 18};
  for (int i = 0; i < 3; ++i) records.push_back({i, {}, {{0, from_seconds(at_s[i]), ReadingState::ok}}, Next::enough});
  CHECK(finding(e, read.step->reduce(Depth::full, records, e.settings), "path_zero_age").value == doctest::Approx(6));
}

TEST_CASE("noise is the standard deviation of the readings") {
  const ReadStep read = read_step("offset", "ranges = [\"x1\"]\nreadings = 4\n");
  const Expansion e = read.step->expand(Depth::full);
  std::vector<SettingRecord> records;
  for (int i = 0; i < 2; ++i) {
    SettingRecord r{i, {}, {}, Next::enough};
    for (const double v : {1e-6, 3e-6, 5e-6, 7e-6}) r.readings.push_back({v, {}, ReadingState::ok});
    records.push_back(r);
  }
  // sum of squares about 4: 9 + 1 + 1 + 9 = 20; 20 / 3 = 6.667; root 2.582
  CHECK(finding(e, read.step->reduce(Depth::full, records, e.settings), "noise", "x1").value ==
        doctest::Approx(2.5820e-6).epsilon(1e-4));
}

TEST_CASE("the offset's uncertainty is built from its parts") {
  const ReadStep read = read_step("offset", "ranges = [\"x100\"]\nreadings = 1\n");
  const auto p = played(read, [](const Setting& s, double) { return s.supply.on() ? 300e-6 : 0.0; });
  // 0.1 V range: noise 0.25 uV of one reading each, digit 0.1 uV each, 50 ppm of the difference, drift of the path
  // 2 uV and 100 times the short's 0.1 uV as rectangular bounds.
  const double parts =
      2 * 0.25 * 0.25 + 2 * 0.1 * 0.1 / 12 + (300 * 50e-6) * (300 * 50e-6) / 3 + 2 * 2 / 3.0 + 10 * 10 / 3.0;
  CHECK(p.of("offset", "x100").u == doctest::Approx(std::sqrt(parts) * 1e-6).epsilon(1e-9));
}

TEST_CASE("the slope of a known line is the gain, and a drift in time leaves it") {
  const auto p = played(read_step("gain", "ranges = [\"x10\"]\noutputs = [\"-8 V\", \"-4 V\", \"4 V\", \"8 V\"]\n"),
                        [](const Setting& s, double at_s) {
                          if (closed(s, Role::meter_to_input)) return s.source.dc_V + 11e-6 + 3e-6 * at_s;
                          return 10.002 * s.source.dc_V + 0.7e-3 + 40e-6 * at_s;
                        });
  CHECK(p.of("gain", "x10").value == doctest::Approx(10.002).epsilon(1e-8));
  CHECK(std::abs(p.of("linearity", "x10").value) < 1e-8);
  CHECK(p.of("gain", "x10").n == 32);
}

TEST_CASE("an accuracy common to all levels does not average down, and leaves the ratio on one range") {
  const auto line = [](const Setting& s, double) {
    return closed(s, Role::meter_to_input) ? s.source.dc_V : 10.0 * s.source.dc_V;
  };
  const std::string keys = "ranges = [\"x10\"]\noutputs = [\"-8 V\", \"-4 V\", \"4 V\", \"8 V\"]\nreadings = ";
  const double few = played(read_step("gain", keys + "2\n"), line).of("gain", "x10").u;
  const double many = played(read_step("gain", keys + "100\n"), line).of("gain", "x10").u;
  // 0.8 V on the 1 V range (40 ppm), 8 V on the 10 V range (35 ppm), rectangular: 30.7 ppm of 10.
  CHECK(many == doctest::Approx(10 * std::sqrt((40.0 * 40 + 35 * 35) / 3) * 1e-6).epsilon(0.05));
  CHECK(few >= many);
  const auto unity = [](const Setting& s, double) { return s.source.dc_V; };
  const double same =
      played(read_step("gain", "ranges = [\"x1\"]\noutputs = [\"-8 V\", \"8 V\"]\n"), unity).of("gain", "x1").u;
  CHECK(same < 2e-6);
}

TEST_CASE("a bent line shows its worst residual over the span of the outputs") {
  // Inputs -8 -4 4 8, outputs the same but for +b -b -b +b: slope stays 1, mean shift 0, residuals +-b; span 16.
  const double b = 1e-3;
  const auto p = played(read_step("gain", "ranges = [\"x1\"]\noutputs = [\"-8 V\", \"-4 V\", \"4 V\", \"8 V\"]\n"),
                        [=](const Setting& s, double) {
                          if (closed(s, Role::meter_to_input)) return s.source.dc_V;
                          return s.source.dc_V + (std::abs(s.source.dc_V) > 6 ? b : -b);
                        });
  CHECK(p.of("gain", "x1").value == doctest::Approx(1));
  CHECK(std::abs(p.of("linearity", "x1").value) == doctest::Approx(b / 16));
}

TEST_CASE("a drift linear in time is taken out of load_delta exactly") {
  const auto p = played(read_step("offset-under-load", under_load_keys), [](const Setting& s, double at_s) {
    if (std::holds_alternative<ReadDetector>(s.act)) return sound_level(s);
    const double shift_V = closed(s, Role::load, "1 nF") ? 1.5e-3 : 0;
    return 100 * s.source.dc_V + 200e-6 + 30e-6 * at_s + shift_V;
  });
  CHECK(p.of("load_delta", "1 nF at 0 V").value == doctest::Approx(1.5e-3).epsilon(1e-9));
  CHECK(p.of("load_delta", "1 nF at +5 V").value == doctest::Approx(1.5e-3).epsilon(1e-9));
  // Exactly, but for the rounding of 5 V in double precision: 9e-16 V in each of some 30 readings.
  for (const char* load : {"100 pF", "330 pF", "3.3 nF", "10 nF", "100 nF", "1 uF", "10 uF"})
    for (const char* level : {"0 V", "+5 V", "-5 V"})
      CHECK(std::abs(p.of("load_delta", std::string(load) + " at " + level).value) < 1e-13);
  CHECK(p.of("load_delta", "1 nF at 0 V").n == 30);
}

TEST_CASE("what is left of a shift after the loads shows in return_to_open") {
  const auto p = played(read_step("offset-under-load", under_load_keys), [](const Setting& s, double at_s) {
    if (std::holds_alternative<ReadDetector>(s.act)) return sound_level(s);
    return 100 * s.source.dc_V +
           (at_s > 1 && !closed(s, Role::source_to_input) && starts_with(s, "s/return") ? 400e-6 : 0);
  });
  CHECK(p.of("return_to_open", "0 V").value == doctest::Approx(400e-6));
}

TEST_CASE("a board that latches on powering up with the load shows in power_up_delta") {
  const auto p = played(read_step("offset-under-load", under_load_keys), [](const Setting& s, double) {
    if (std::holds_alternative<ReadDetector>(s.act))
      return starts_with(s, "s/power-up") && closed(s, Role::load, "1 nF") ? 80e-3 : sound_level(s);
    return 100 * s.source.dc_V + (starts_with(s, "s/power-up/1 nF/loaded") ? -2e-3 : 100e-6);
  });
  CHECK(p.of("power_up_delta", "1 nF").value == doctest::Approx(-2.1e-3));
  CHECK(p.of("power_up_detector", "1 nF").value == doctest::Approx(80e-3));
}

TEST_CASE("a load at the pad reads as its own capacitance, and the open output as the jig's") {
  const auto p = played(read_step("offset-under-load", under_load_keys), [](const Setting& s, double) {
    return std::holds_alternative<ReadDetector>(s.act) ? sound_level(s) : 0.0;
  });
  for (const Load& load : sample_jig()->loads) {
    const Finding f = p.of("load_proof", load.id);
    INFO(load.id);
    CHECK(f.value == doctest::Approx(load.capacitance_F).epsilon(1e-3));
    const Metric& m = p.expansion.metrics[static_cast<std::size_t>(f.metric)];
    CHECK(f.value - 3 * f.u > *m.own_low);
    CHECK(f.value + 3 * f.u < *m.own_high);
  }
  CHECK(p.of("load_proof", "open").value == doctest::Approx(65e-12).epsilon(1e-3));
}

TEST_CASE("a load that never reached the pad is outside its proof's bounds") {
  const auto p = played(read_step("offset-under-load", under_load_keys),
                        [](const Setting& s, double) { return s.source.tone_V != 0 ? tone_V(s, 65e-12) : 0.0; });
  for (const Load& load : sample_jig()->loads) {
    const Finding f = p.of("load_proof", load.id);
    CHECK(f.value < *p.expansion.metrics[static_cast<std::size_t>(f.metric)].own_low);
  }
}

TEST_CASE("any load welded to the output puts the open proof out of bounds, or leaves nothing to say") {
  for (const Load& welded : sample_jig()->loads) {
    INFO(welded.id);
    const auto p = played(read_step("offset-under-load", under_load_keys), [&](const Setting& s, double) {
      if (s.source.tone_V == 0) return 0.3e-3;
      const double more_F = closed(s, Role::load, welded.id) ? 0 : welded.capacitance_F;
      return std::max(tone_V(s, 65e-12 + load_F(s) + more_F), 0.2e-3);
    });
    const Finding f = p.of("load_proof", "open");
    const bool said = f.state == FindingState::measured;
    if (said) CHECK(f.value > *p.expansion.metrics[static_cast<std::size_t>(f.metric)].own_high);
  }
}

TEST_CASE("a dead tone path proves nothing") {
  const auto p = played(read_step("offset-under-load", under_load_keys), [](const Setting&, double) { return 0.2e-3; });
  CHECK(p.of("load_proof", "open").state == FindingState::no_data);
  CHECK(p.of("load_proof", "1 nF").state == FindingState::no_data);
}

TEST_CASE("the reference is compared with its own value") {
  const auto p = played(read_step("known-value", ""),
                        [](const Setting& s, double) { return closed(s, Role::meter_to_zero) ? 2e-6 : 1.000042; });
  CHECK(p.of("meter_zero").value == doctest::Approx(2e-6));
  CHECK(p.of("reference_error").value == doctest::Approx(30e-6).epsilon(1e-6));
  // 40 ppm of 1 V + 7 ppm of 1 V + 5 uV of EMF + 2 * 8 uV
  CHECK(*p.expansion.metrics[1].own_high == doctest::Approx(68e-6).epsilon(1e-4));
}

TEST_CASE("a question's answer is judged by the step itself") {
  const auto yes = read_step("question", "ask = \"Is the lamp lit?\"\nanswer = \"no\"\n").step->expand(Depth::full);
  CHECK(yes.metrics[0].own_low == 0.0);
  CHECK(yes.metrics[0].own_high == 0.0);
  const auto value = read_step("question", "ask = \"What does the panel show?\"\nlow = \"4 V\"\nhigh = \"5 V\"\n")
                         .step->expand(Depth::full);
  CHECK(value.metrics[0].unit == Unit::volt);
  CHECK(value.metrics[0].own_low == 4.0);
  CHECK(std::get<Ask>(value.settings[0].act).step == "s");
  CHECK_FALSE(std::get<Ask>(value.settings[0].act).yes_no);
}
