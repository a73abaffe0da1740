#include "station/spread_text.hpp"

#include <doctest/doctest.h>

#include <limits>
#include <nlohmann/json.hpp>

using namespace jigwright;

namespace {

constexpr double none = std::numeric_limits<double>::quiet_NaN();

Spread gain() {
  Spread s;
  s.metric.metric.name = {"gain", "gain", "x100"};
  s.metric.metric.unit = Unit::ratio;
  s.findings = 240;
  s.measured = 239;
  s.missed = 4;
  s.quantiles = {99.92478, 99.92753, 99.94039, 99.97343, 99.99943, 100.02312, 100.07021, 100.10071, 100.10574};
  s.summary = {239, 99.999781, 0.0312};
  s.limit.emplace();
  s.limit->applied = {99.93, 100.07};
  s.limit->specification = {99.9, 100.1};
  return s;
}

Spread nothing() {
  Spread s;
  s.metric.metric.name = {"gain", "gain", "x1"};
  s.metric.metric.unit = Unit::ratio;
  s.quantiles.fill(none);
  return s;
}

}  // namespace

TEST_CASE("one variant is shown in full, with seven digits where the deviation needs them") {
  CHECK(render({gain()}, false, false) ==
        "gain: gain (x100): first findings of 240 boards: 239 measured, 1 not, 4 missed.\n"
        "  least      99.92478 V/V\n"
        "  0.1 %      99.92753 V/V\n"
        "  1 %        99.94039 V/V\n"
        "  10 %       99.97343 V/V\n"
        "  median     99.99943 V/V\n"
        "  90 %       100.0231 V/V\n"
        "  99 %       100.0702 V/V\n"
        "  99.9 %     100.1007 V/V\n"
        "  most       100.1057 V/V\n"
        "  mean       99.99978 V/V\n"
        "  deviation  0.0312 V/V\n"
        "  test limit 99.93 V/V to 100.07 V/V, in the latest trial\n");
}

TEST_CASE("several variants have a line each, and nothing measured shows as none") {
  CHECK(render({nothing(), gain()}, true, false) ==
        "gain: gain, every finding. Name a variant for more of it.\n"
        "  variant  findings  not measured  missed         least           1 %        median          99 %          "
        "most          mean   deviation  test limit\n"
        "  x1              0             0       0          none          none          none          none          "
        "none          none        none  -\n"
        "  x100          240             1       4  99.92478 V/V  99.94039 V/V  99.99943 V/V  100.0702 V/V  "
        "100.1057 V/V  99.99978 V/V  0.0312 V/V  99.93 V/V to 100.07 V/V\n");
}

TEST_CASE("JSON gives every quantile with its share, and null for what there is not") {
  const auto json = nlohmann::json::parse(render({nothing(), gain()}, false, true));
  CHECK(json["step"] == "gain");
  CHECK(json["metric"] == "gain");
  CHECK(json["of"] == "first findings");
  CHECK(json["variants"][0]["quantiles"][4]["value"].is_null());
  CHECK(json["variants"][0]["mean"].is_null());
  CHECK(json["variants"][0]["high"].is_null());
  const auto& x100 = json["variants"][1];
  CHECK(x100["findings"] == 240);
  CHECK(x100["measured"] == 239);
  CHECK(x100["missed"] == 4);
  CHECK(x100["unit"] == "V/V");
  CHECK(x100["quantiles"][1]["share"] == 0.001);
  CHECK(x100["quantiles"][1]["value"] == 99.92753);
  CHECK(x100["sd"] == 0.0312);
  CHECK(x100["low"] == 99.93);
  CHECK(x100["spec_high"] == 100.1);
}

TEST_CASE("CSV has a line a finding") {
  CHECK(spread_csv_header() == "serial,at,step,metric,variant,value,unit,state,verdict\r\n");
  const Spread s = gain();
  CHECK(spread_csv_line(s.metric, {"TB-01", 1'767'960'000'000'000, 99.5, FindingState::measured, Verdict::missed}) ==
        "TB-01,2026-01-09T12:00:00Z,gain,gain,x100,99.5,V/V,measured,missed\r\n");
  CHECK(spread_csv_line(s.metric, {"TB-01", 1'767'960'000'000'000, none, FindingState::no_data, Verdict::invalid}) ==
        "TB-01,2026-01-09T12:00:00Z,gain,gain,x100,,V/V,no data,invalid\r\n");
}
