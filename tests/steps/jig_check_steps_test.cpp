// The steps with which a jig proves itself, over readings made by hand. Expected values are worked out here.
#include <cmath>
#include <complex>
#include <limits>
#include <numbers>

#include "tests/steps/bench_top.hpp"

using namespace jigwright;
using namespace jigwright::bench_top;

namespace {

struct Reduced {
  Expansion e;
  std::vector<Finding> findings;
  Finding of(const std::string& name, const std::string& variant = {}) const {
    return finding(e, findings, name, variant);
  }
  const Metric& metric_of(const std::string& name, const std::string& variant = {}) const {
    return e.metrics[static_cast<std::size_t>(metric(e, name, variant))];
  }
  bool met(const std::string& name, const std::string& variant = {}) const {
    const Finding f = of(name, variant);
    const Metric& m = metric_of(name, variant);
    return f.state == FindingState::measured && (!m.own_low || f.value >= *m.own_low) &&
           (!m.own_high || f.value <= *m.own_high);
  }
};

/// A value beyond every range is an overload.
Reduced done(std::string_view kind, const std::string& keys, const ValueOf& value_of) {
  const ReadStep read = read_step(kind, keys);
  REQUIRE_MESSAGE(!read.faults.any(), read.report());
  Reduced out;
  out.e = read.step->expand(Depth::full);
  auto records = play(out.e.settings, value_of);
  for (auto& r : records)
    for (auto& reading : r.readings)
      if (std::isinf(reading.value)) reading.state = ReadingState::overload;
  for (auto& r : records) r.ended = decide(out.e.settings[static_cast<std::size_t>(r.setting)].stop, r.readings);
  out.findings = read.step->reduce(Depth::full, records, out.e.settings);
  return out;
}

constexpr double open_path = std::numeric_limits<double>::infinity();

bool ohm(const Setting& s) {
  const auto* meter = std::get_if<ReadMeter>(&s.act);
  return meter != nullptr && meter->setup.function == MeterFunction::resistance;
}

/// Relays of the meter that a setting closes, and one more that never opens.
int joined(const Setting& s, const std::string& welded = {}) {
  int n = 0;
  for (std::size_t i = 0; i < sample_jig()->relays.size(); ++i) {
    const Relay& r = sample_jig()->relays[i];
    const bool path =
        r.role == Role::probe_loop || (role_name(r.role).starts_with("meter") && r.role != Role::meter_reversed);
    n += path && (s.bus[i] || r.id == welded);
  }
  return n;
}

/// A copper short: one path reads 0.3 ohm, none or two read open; the reference reads 1 V.
double copper(const Setting& s, const std::string& welded) {
  const int n = joined(s, welded);
  if (ohm(s)) return n == 1 ? 0.3 : open_path;
  const double V = closed(s, Role::meter_to_reference) ? 1.0 / n : 0;
  return closed(s, Role::meter_reversed) ? -V : V;
}

/// |level| at OUT behind 10 kohm and the source's 50 ohm, with Ru, C (and its series resistance) to ground.
double level(double source_V, double f_Hz, double Ru, double C, double Rs = 0, double stray = 65e-12) {
  using Z = std::complex<double>;
  const Z jw(0, 2 * std::numbers::pi * f_Hz);
  const Z y = 1 / Ru + jw * stray + (C > 0 ? 1.0 / (Rs + 1.0 / (jw * C)) : Z{});
  return std::abs(source_V / (1.0 + 10.05e3 * y));
}

struct World {
  double Ru{22e3};
  std::string welded, gone;  ///< load
  std::string leaky;         ///< load with `leak` beside it
  double leak{1e6};
  double extra_ohm{0};  ///< in series with every load
};

double at_pad(const Setting& s, const World& w) {
  double C = 0, Rs = 0, S = 1 / w.Ru;
  for (const Load& load : sample_jig()->loads) {
    const bool on = (closed(s, Role::load, load.id) || load.id == w.welded) && load.id != w.gone;
    if (!on) continue;
    C += load.capacitance_F;
    Rs = load.series_ohm + 0.08 + w.extra_ohm;
    if (load.id == w.leaky) S += 1 / w.leak;
  }
  if (ohm(s)) return 1 / S;
  return level(s.source.tone_V, s.source.tone_Hz, 1 / S, C, Rs);
}

Reduced loads(const World& w) {
  return done("load-check", "", [&](const Setting& s, double) { return at_pad(s, w); });
}

}  // namespace

TEST_CASE("on copper every relay of the meter changes the reading, by at least half of what an open path is") {
  const Reduced d =
      done("relay-check", "nest = \"copper short\"", [](const Setting& s, double) { return copper(s, ""); });
  CHECK(d.findings.size() == 17);
  for (const Finding& f : d.findings)
    CHECK(d.met("change", d.e.metrics[static_cast<std::size_t>(f.metric)].name.variant));
  CHECK(d.of("change", "K3, probe loop IN+").value == doctest::Approx(120 - 0.3));  // overload at 1.2 x 100 ohm
  CHECK(std::isnan(d.of("change", "K3, probe loop IN+").u));
  CHECK(d.of("change", "K11, meter reversed").value == doctest::Approx(2));
  CHECK(d.metric_of("change", "K11, meter reversed").own_low.value() == doctest::Approx(1.000012));
}

TEST_CASE("a welded relay changes nothing and is missed alone; what it hides is no data") {
  const Reduced d =
      done("relay-check", "nest = \"copper short\"", [](const Setting& s, double) { return copper(s, "K12"); });
  CHECK(d.of("change", "K12, meter to input").value == doctest::Approx(0));
  CHECK_FALSE(d.met("change", "K12, meter to input"));
  CHECK(d.met("change", "K3, probe loop IN+"));
  CHECK(d.of("change", "K16, meter to reference").state == FindingState::no_data);
}

TEST_CASE("a meter that is over range in every reading proves no relay") {
  const Reduced d = done("relay-check", "nest = \"copper short\"", [](const Setting&, double) { return open_path; });
  for (const Finding& f : d.findings)
    CHECK_FALSE(d.met("change", d.e.metrics[static_cast<std::size_t>(f.metric)].name.variant));
}

TEST_CASE("a missing reading proves no relay, closed or open") {
  const ReadStep read = read_step("relay-check", "nest = \"copper short\"");
  const Expansion e = read.step->expand(Depth::full);
  const auto good = play(e.settings, [](const Setting& s, double) { return std::min(copper(s, ""), 119.0); });
  for (std::size_t i = 0; i < good.size(); ++i) {
    auto records = good;
    records[i].readings.back().state = ReadingState::missing;
    records[i].ended = Next::gave_up;
    int none = 0;
    for (const Finding& f : read.step->reduce(Depth::full, records, e.settings))
      none += f.state == FindingState::no_data;
    CHECK(none >= 1);
  }
}

TEST_CASE("in an empty nest a loop must be open, and one that reads a contact is missed") {
  const Reduced d = done("relay-check", "nest = \"nothing\"", [](const Setting& s, double) {
    return closed(s, Role::probe_loop, "OUT") || closed(s, Role::meter_to_zero) ? 0.3 : open_path;
  });
  CHECK(d.findings.size() == 10);
  CHECK(d.met("change", "K17, meter to zero"));
  CHECK_FALSE(d.met("open", "K2, probe loop OUT"));
  CHECK(d.met("open", "K3, probe loop IN+"));
  CHECK(d.of("open", "K3, probe loop IN+").value == doctest::Approx(120));
  const Reduced deaf = done("relay-check", "nest = \"nothing\"", [](const Setting&, double) { return open_path; });
  CHECK_FALSE(deaf.met("change", "K17, meter to zero"));
  CHECK(deaf.of("open", "K3, probe loop IN+").state == FindingState::no_data);
}

TEST_CASE("a range's relay is told by what it makes of the output") {
  const auto output = [](const Setting& s, double) {
    const double gain = closed(s, Role::range, "x10") ? 10 : closed(s, Role::range, "x100") ? 100 : 1;
    return gain * s.source.dc_V;
  };
  const Reduced d = done("relay-check", "nest = \"powered board\"", output);
  CHECK(d.findings.size() == 2);
  // All gains together, 111, bring the output to half the swing of 10 V.
  CHECK(d.of("change", "K23, range x10").value == doctest::Approx(9 * 5.0 / 111));
  CHECK(d.of("change", "K24, range x100").value == doctest::Approx(99 * 5.0 / 111));
  CHECK(d.metric_of("change", "K24, range x100").own_low.value() == doctest::Approx(99 * 2.5 / 111));
}

TEST_CASE("half the difference of both polarities is the path's zero, half the sum the meter's") {
  const Reduced d = done("path-zero", "readings = 5", [](const Setting& s, double) {
    return closed(s, Role::meter_reversed) ? -40e-6 + 3e-6 : 40e-6 + 3e-6;
  });
  CHECK(d.of("path_zero", "output").value == doctest::Approx(40e-6));
  CHECK(d.of("meter_zero", "rail -").value == doctest::Approx(3e-6));
  CHECK(d.met("path_zero", "output"));
  CHECK(d.metric_of("path_zero", "output").own_high.value() == doctest::Approx(62.5e-6));  // 60 uV + 5 uV / 2
  CHECK(d.metric_of("meter_zero", "output").own_high.value() == doctest::Approx(8.5e-6));  // 35 ppm of 0.1 V + 5 uV
  const Reduced off =
      done("path-zero", "", [](const Setting& s, double) { return closed(s, Role::meter_reversed) ? -70e-6 : 70e-6; });
  CHECK_FALSE(off.met("path_zero", "output"));
  CHECK(off.met("meter_zero", "output"));
}

TEST_CASE("the source's error is the mean less the level, bounded by source, meter and path") {
  const Reduced d = done("source-check", "levels = [\"-1 V\", \"1 V\"]",
                         [](const Setting& s, double) { return s.source.dc_V * (1 + 200e-6); });
  CHECK(d.of("source_error", "+1 V").value == doctest::Approx(200e-6));
  CHECK(d.of("source_error", "-1 V").value == doctest::Approx(-200e-6));
  // 200 ppm + 50 uV; 40 ppm of the reading + 7 ppm of 1 V; 60 uV.
  CHECK(d.metric_of("source_error", "+1 V").own_high.value() == doctest::Approx(250e-6 + 47e-6 + 60e-6));
  const Reduced dead = done("source-check", "levels = [\"-1 V\", \"1 V\"]", [](const Setting&, double) { return 0.0; });
  CHECK_FALSE(dead.met("source_error", "+1 V"));
}

TEST_CASE("levels of one sign only are a fault") {
  const ReadStep read = read_step("source-check", "levels = [\"0.1 V\", \"1 V\"]");
  CHECK(read.report().find("\"levels\" needs levels of both signs") != std::string::npos);
}

TEST_CASE("capacitance, leakage and series resistance of each load come back from the divider") {
  const Reduced d = loads({});
  CHECK(d.met("stray"));
  CHECK(d.of("stray").value == doctest::Approx(65e-12).epsilon(0.01));
  for (const Relay& r : sample_jig()->relays) {
    if (r.role != Role::load) continue;
    const std::string name = r.id + ", load " + r.of;
    INFO(name);
    CHECK(d.of("capacitance", name).value == doctest::Approx(sample_jig()->load(r.of)->capacitance_F).epsilon(0.01));
    for (const char* m : {"capacitance", "released", "leakage"}) CHECK(d.met(m, name));
  }
  CHECK(d.of("leakage", "K32, load 10 uF").value > 100e6);
  for (const char* name : {"K30, load 100 nF", "K31, load 1 uF", "K32, load 10 uF"}) CHECK(d.met("series", name));
}

TEST_CASE("a resistance beside a load is found, at least as large as two standard uncertainties allow") {
  World w;
  w.leaky = "1 nF";
  const Reduced d = loads(w);
  const double found = d.of("leakage", "K27, load 1 nF").value;
  CHECK(found < 1e6);
  CHECK(found > 0.99e6);
  CHECK_FALSE(d.met("leakage", "K27, load 1 nF"));
  CHECK(d.met("leakage", "K28, load 3.3 nF"));
}

TEST_CASE("ten ohm in series come back where the reactance does not hide them") {
  World w;
  w.extra_ohm = 10;
  const Reduced d = loads(w);
  CHECK(d.of("series", "K31, load 1 uF").value == doctest::Approx(10.11).epsilon(0.01));
  CHECK(d.of("series", "K30, load 100 nF").value == doctest::Approx(10.12).epsilon(0.01));
  CHECK_FALSE(d.met("series", "K30, load 100 nF"));
}

TEST_CASE("a load that stays when released is told from the others, whatever its size") {
  for (const Relay& r : sample_jig()->relays) {
    if (r.role != Role::load) continue;
    World w;
    w.welded = r.of;
    const Reduced d = loads(w);
    INFO(r.of);
    for (const Relay& other : sample_jig()->relays)
      if (other.role == Role::load) CHECK(d.met("released", other.id + ", load " + other.of) == (other.id != r.id));
  }
}

TEST_CASE("a load that is not there is missed") {
  World w;
  w.gone = "330 pF";
  const Reduced d = loads(w);
  CHECK_FALSE(d.met("capacitance", "K26, load 330 pF"));
  CHECK(d.met("capacitance", "K25, load 100 pF"));
}
