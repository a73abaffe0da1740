// No bad reading becomes a measured finding, in any setting of any kind.
#include <cmath>
#include <limits>

#include "tests/steps/bench_top.hpp"

using namespace jigwright;
using namespace jigwright::bench_top;

namespace {

const std::vector<std::pair<const char*, std::string>> kinds{
    {"known-value", ""},
    {"contact", ""},
    {"identity", "resistor = \"4.99 kohm\"\ntolerance = \"2 %\"\n"},
    {"power-up", ""},
    {"supply-current", ""},
    {"offset", "reverse = true\n"},
    {"gain", "outputs = [\"-8 V\", \"8 V\"]\n"},
    {"offset-under-load", under_load_keys},
    {"question", "ask = \"Is the lamp lit?\"\nanswer = \"yes\"\n"}};

double fair(const Setting& s, double) {
  return s.source.tone_V != 0 ? 50e-3 : s.source.dc_V;
}

/// The record as the player leaves it when the last reading is this one.
SettingRecord spoilt(const Setting& s, SettingRecord record, ReadingState state, double value) {
  record.readings.back().state = state;
  record.readings.back().value = value;
  record.ended = decide(s.stop, record.readings);
  return record;
}

void check_all_bad(const Step& step, const std::vector<SettingRecord>& records, const Expansion& e,
                   FindingState expected) {
  for (const Finding& f : step.reduce(Depth::full, records, e.settings)) {
    INFO(label(e.metrics[static_cast<std::size_t>(f.metric)].name));
    CHECK(f.state == expected);
    CHECK(std::isnan(f.value));
  }
}

void check_all_spoilt(ReadingState state, double value, FindingState expected) {
  for (const auto& [kind, keys] : kinds) {
    INFO(kind);
    const ReadStep read = read_step(kind, keys);
    const Expansion e = read.step->expand(Depth::full);
    auto records = play(e.settings, fair);
    for (auto& r : records) r = spoilt(e.settings[static_cast<std::size_t>(r.setting)], r, state, value);
    check_all_bad(*read.step, records, e, expected);
  }
}

}  // namespace

TEST_CASE("an overload anywhere is over range") {
  check_all_spoilt(ReadingState::overload, 1e9, FindingState::over_range);
}

TEST_CASE("missing, refused and stale readings are no data") {
  for (const ReadingState state : {ReadingState::missing, ReadingState::refused, ReadingState::stale})
    check_all_spoilt(state, 0, FindingState::no_data);
}

TEST_CASE("a reading that is no number is no data, whatever it calls itself") {
  check_all_spoilt(ReadingState::ok, std::numeric_limits<double>::quiet_NaN(), FindingState::no_data);
  check_all_spoilt(ReadingState::ok, std::numeric_limits<double>::infinity(), FindingState::no_data);
}

TEST_CASE("a record without readings, or with too few, is no data") {
  for (const auto& [kind, keys] : kinds) {
    const ReadStep read = read_step(kind, keys);
    const Expansion e = read.step->expand(Depth::full);
    auto records = play(e.settings, fair);
    for (auto& r : records) r.readings.pop_back();
    check_all_bad(*read.step, records, e, FindingState::no_data);
  }
}

TEST_CASE("one bad setting spoils every finding that rests on it, and at least one does unless it only waits") {
  for (const auto& [kind, keys] : kinds) {
    const ReadStep read = read_step(kind, keys);
    const Expansion e = read.step->expand(Depth::full);
    const auto good = play(e.settings, fair);
    for (std::size_t i = 0; i < good.size(); ++i) {
      if (std::holds_alternative<Dwell>(e.settings[i].act)) continue;
      INFO(e.settings[i].id);
      auto records = good;
      records[i] = spoilt(e.settings[i], records[i], ReadingState::missing, 0);
      int bad = 0;
      for (const Finding& f : read.step->reduce(Depth::full, records, e.settings))
        bad += f.state == FindingState::no_data;
      CHECK(bad > 0);
    }
  }
}

TEST_CASE("a finding whose settings were not all played is not made up") {
  for (const auto& [kind, keys] : kinds) {
    const ReadStep read = read_step(kind, keys);
    const Expansion e = read.step->expand(Depth::full);
    const auto good = play(e.settings, fair);
    CHECK(read.step->reduce(Depth::full, {}, e.settings).empty());
    for (std::size_t i = 0; i < good.size(); ++i) {
      if (std::holds_alternative<Dwell>(e.settings[i].act)) continue;
      INFO(e.settings[i].id);
      auto records = good;
      records.erase(records.begin() + static_cast<std::ptrdiff_t>(i));
      CHECK(read.step->reduce(Depth::full, records, e.settings).size() < e.metrics.size());
    }
  }
}

TEST_CASE("never stable is not settled, and so is all that rests on it") {
  const ReadStep read = read_step("offset-under-load",
                                  "range = \"x100\"\nloads = [\"1 nF\", \"10 nF\"]\n"
                                  "stable = { window = 4, tolerance = \"20 uV\", max = 12 }\n");
  INFO(read.report());
  REQUIRE_FALSE(read.faults.any());
  const Expansion e = read.step->expand(Depth::full);
  const auto records = play(e.settings, [](const Setting& s, double at_s) {
    const bool restless = closed(s, Role::load, "1 nF") && std::holds_alternative<ReadMeter>(s.act);
    return fair(s, at_s) + (restless ? 1e-3 * std::sin(40 * at_s) : 0.0);
  });
  const auto findings = read.step->reduce(Depth::full, records, e.settings);
  CHECK(finding(e, findings, "output", "1 nF at 0 V").state == FindingState::not_settled);
  CHECK(finding(e, findings, "load_delta", "1 nF at 0 V").state == FindingState::not_settled);
  CHECK(finding(e, findings, "load_delta", "10 nF at 0 V").state == FindingState::measured);
}

TEST_CASE("a stable setting's value is the mean of its last window") {
  const ReadStep read = read_step("offset-under-load",
                                  "range = \"x100\"\nloads = [\"1 nF\"]\n"
                                  "stable = { window = 2, tolerance = \"20 uV\", max = 12 }\n");
  const Expansion e = read.step->expand(Depth::full);
  int n = 0;
  const auto records = play(e.settings, [&](const Setting& s, double at_s) {
    if (!closed(s, Role::load, "1 nF") || !std::holds_alternative<ReadMeter>(s.act)) return fair(s, at_s);
    return n++ == 0 ? 1.0 : n == 2 ? 2e-3 : 2.01e-3;
  });
  const auto findings = read.step->reduce(Depth::full, records, e.settings);
  CHECK(finding(e, findings, "output", "1 nF at 0 V").value == doctest::Approx(2.005e-3));
  CHECK(finding(e, findings, "output", "1 nF at 0 V").n == 2);
}

TEST_CASE("records in any order, among another step's settings, give the same findings") {
  const ReadStep read = read_step("offset-under-load", under_load_keys);
  const Expansion e = read.step->expand(Depth::full);
  const auto records = play(e.settings, [](const Setting& s, double at_s) { return fair(s, at_s) + 1e-6 * at_s; });
  const auto straight = read.step->reduce(Depth::full, records, e.settings);
  std::vector<Setting> turned(e.settings.rbegin(), e.settings.rend());
  turned.insert(turned.begin(), Setting{});
  std::vector<SettingRecord> moved(records.rbegin(), records.rend());
  for (auto& r : moved) r.setting = static_cast<int>(e.settings.size()) - r.setting;
  const auto other = read.step->reduce(Depth::full, moved, turned);
  REQUIRE(other.size() == straight.size());
  for (std::size_t i = 0; i < other.size(); ++i) {
    CHECK(other[i].metric == straight[i].metric);
    CHECK(other[i].value == straight[i].value);
  }
}
