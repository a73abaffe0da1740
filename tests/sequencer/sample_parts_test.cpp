// The sample's parts have values that can be bought: IEC 60063 preferred values (tests/data/e_series.csv, generated
// from the standard's rule and checked against published lists).
#include <doctest/doctest.h>

#include <cmath>
#include <fstream>
#include <map>
#include <set>
#include <sstream>

#include "base/quantity.hpp"
#include "sequencer/plan.hpp"

using namespace jigwright;

namespace {

std::map<std::string, std::set<long>> series() {
  std::map<std::string, std::set<long>> out;
  std::ifstream file(TEST_DATA "/e_series.csv");
  std::string line;
  std::getline(file, line);
  while (std::getline(file, line)) {
    std::istringstream cells(line);
    std::string name, index, value;
    std::getline(cells, name, ',');
    std::getline(cells, index, ',');
    std::getline(cells, value, ',');
    out[name].insert(std::stol(value));
  }
  return out;
}

/// The value's leading digits as a whole number of so many digits, or -1 if it has more.
long digits(double value, int count) {
  const double scale = std::pow(10.0, count - 1 - std::floor(std::log10(value) + 1e-9));
  const double whole = std::round(value * scale);
  return std::abs(value * scale - whole) < 1e-6 * whole ? static_cast<long>(whole) : -1;
}

}  // namespace

TEST_CASE("the sample's loads are E6 values, as capacitors are sold") {
  const auto known = series();
  REQUIRE(known.at("E6").size() == 6);
  Faults faults;
  const auto plan = read_plan(SOURCE_FOLDER "/sample-runs/plan-b.toml", faults);
  REQUIRE(plan);
  REQUIRE(plan->jig->loads.size() == 8);
  for (const Load& load : plan->jig->loads) {
    CAPTURE(load.id);
    const auto named = parse_quantity(load.id, Unit::farad);
    REQUIRE(named.ok());
    CHECK(known.at("E6").count(digits(named.value(), 2)) == 1);
    // What was measured at the probe is that part within its usual 20 %.
    CHECK(std::abs(load.capacitance_F / named.value() - 1) < 0.2);
  }
}

TEST_CASE("the sample's resistors are E192 values") {
  const auto known = series();
  REQUIRE(known.at("E192").size() == 192);
  // Identity, gain and series resistors of the lists in sample-runs/reels.csv.
  for (const char* text : {"4.99 kohm", "10 kohm", "1.11 kohm", "101 ohm", "100 ohm"}) {
    CAPTURE(text);
    const auto value = parse_quantity(text, Unit::ohm);
    REQUIRE(value.ok());
    CHECK(known.at("E192").count(digits(value.value(), 3)) == 1);
  }
}
