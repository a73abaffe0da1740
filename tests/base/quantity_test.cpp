#include "base/quantity.hpp"

#include <doctest/doctest.h>

#include <cmath>
#include <limits>
#include <string>
#include <vector>

using namespace jigwright;

namespace {

double read(const std::string& text, Unit unit) {
  const auto q = parse_quantity(text, unit);
  INFO(text);
  REQUIRE(q.ok());
  return q.value();
}

/// "what | to do" of a quantity that can't be read.
std::string fault(const std::string& text, Unit unit) {
  const auto q = parse_quantity(text, unit);
  return q ? "read" : q.error().what + " | " + q.error().to_do;
}

std::string fault(const std::string& text) {
  const auto q = parse_quantity(text);
  return q ? "read" : q.error().what;
}

}  // namespace

TEST_CASE("every prefix of the SI brochure from femto to tera has its factor") {
  // SI brochure, 9th ed., table 7.
  CHECK(read("3 fF", Unit::farad) == doctest::Approx(3e-15));
  CHECK(read("3 pF", Unit::farad) == doctest::Approx(3e-12));
  CHECK(read("3 nF", Unit::farad) == doctest::Approx(3e-9));
  CHECK(read("3 uF", Unit::farad) == doctest::Approx(3e-6));
  CHECK(read("3 mF", Unit::farad) == doctest::Approx(3e-3));
  CHECK(read("3 F", Unit::farad) == 3);
  CHECK(read("3 kohm", Unit::ohm) == 3e3);
  CHECK(read("3 Mohm", Unit::ohm) == 3e6);
  CHECK(read("3 Gohm", Unit::ohm) == 3e9);
  CHECK(read("3 Tohm", Unit::ohm) == 3e12);
}

TEST_CASE("milli and mega are never confused") {
  CHECK(read("5 mohm", Unit::ohm) == doctest::Approx(0.005));
  CHECK(read("5 Mohm", Unit::ohm) == 5e6);
  CHECK(read("1 ms", Unit::second) == doctest::Approx(0.001));
  CHECK(read("2 mV", Unit::volt) == doctest::Approx(0.002));
}

TEST_CASE("metre, milli and minute are told apart by the unit") {
  CHECK(read("2 m", Unit::metre) == 2);
  CHECK(read("2 mm", Unit::metre) == doctest::Approx(0.002));
  CHECK(read("2 min", Unit::second) == 120);
}

TEST_CASE("micro is u or either of the two micro signs") {
  CHECK(read("7 uV", Unit::volt) == doctest::Approx(7e-6));
  CHECK(read("7 \u00b5V", Unit::volt) == doctest::Approx(7e-6));
  CHECK(read("7 \u03bcV", Unit::volt) == doctest::Approx(7e-6));
}

TEST_CASE("ohm is written as a word or with either omega") {
  CHECK(read("4.7 kohm", Unit::ohm) == doctest::Approx(4700));
  CHECK(read("4.7 kOhm", Unit::ohm) == doctest::Approx(4700));
  CHECK(read("4.7 k\u03a9", Unit::ohm) == doctest::Approx(4700));
  CHECK(read("4.7 k\u2126", Unit::ohm) == doctest::Approx(4700));
}

TEST_CASE("ratios are read in ppm, ppb, per cent and volt per volt") {
  CHECK(read("20 ppm", Unit::ratio) == doctest::Approx(20e-6));
  CHECK(read("20 ppb", Unit::ratio) == doctest::Approx(20e-9));
  CHECK(read("2 %", Unit::ratio) == doctest::Approx(0.02));
  CHECK(read("99.9 V/V", Unit::ratio) == doctest::Approx(99.9));
}

TEST_CASE("times, temperatures and noise densities have their usual words") {
  CHECK(read("1.5 h", Unit::second) == 5400);
  CHECK(read("365 days", Unit::second) == 365 * 86400.0);
  CHECK(read("23 degC", Unit::celsius) == 23);
  CHECK(read("23 \u00b0C", Unit::celsius) == 23);
  CHECK(read("5 K", Unit::kelvin) == 5);
  CHECK(read("8 nV/rtHz", Unit::volt_per_root_hertz) == doctest::Approx(8e-9));
  CHECK(read("0.5 MV/s", Unit::volt_per_second) == doctest::Approx(5e5));
  CHECK(read("45 uC", Unit::coulomb) == doctest::Approx(45e-6));
}

TEST_CASE("numbers come as integers, decimals and exponents, with or without a space before the unit") {
  // IEEE 488.2 calls the three NR1, NR2 and NR3.
  CHECK(read("12V", Unit::volt) == 12);
  CHECK(read("+12 V", Unit::volt) == 12);
  CHECK(read("-0.5 mV", Unit::volt) == doctest::Approx(-0.0005));
  CHECK(read(" 1.5E-3 V ", Unit::volt) == doctest::Approx(0.0015));
  CHECK(read("1e3 ohm", Unit::ohm) == 1000);
  CHECK(read("0 V", Unit::volt) == 0);
}

TEST_CASE("a plain number is a count, and only a count") {
  const auto q = parse_quantity("42");
  REQUIRE(q.ok());
  CHECK(q.value().value == 42);
  CHECK(q.value().unit == Unit::count);
  CHECK(fault("42", Unit::volt) == "\"42\" has no unit, expected a voltage (V) | write a unit, as in \"1.5 V\"");
  CHECK(fault("42", Unit::ratio) ==
        "\"42\" has no unit, expected a ratio (V/V, ppm or %) | write a unit, as in \"20 ppm\"");
}

TEST_CASE("another unit than the one expected names both") {
  CHECK(fault("5 A", Unit::volt) ==
        "expected a voltage (V), found a current (A) in \"5 A\" | write it as in \"1.5 V\"");
  CHECK(fault("5 V", Unit::count) ==
        "expected a plain number, found a voltage (V) in \"5 V\" | write it as in \"1.5\"");
  CHECK(fault("5 degC", Unit::kelvin) ==
        "expected a temperature difference (K), found a temperature (degC) in \"5 degC\" | write it as in \"1.5 K\"");
}

TEST_CASE("an unknown unit is named, and the same letters in the right case are offered") {
  CHECK(fault("5 mv", Unit::volt) == "unknown unit \"mv\" in \"5 mv\" | write \"mV\"");
  CHECK(fault("5 pf", Unit::farad) == "unknown unit \"pf\" in \"5 pf\" | write \"pF\"");
  CHECK(fault("5 KOHM", Unit::ohm) == "unknown unit \"KOHM\" in \"5 KOHM\" | write \"kohm\"");
  CHECK(fault("5 hz", Unit::hertz) == "unknown unit \"hz\" in \"5 hz\" | write \"Hz\"");
  CHECK(fault("5 furlongs", Unit::metre) ==
        "unknown unit \"furlongs\" in \"5 furlongs\" | units are V, A, ohm, F, s, Hz, K, degC, V/V, ppm, %, with the "
        "prefixes f p n u m k M G T");
}

TEST_CASE("letters that mean both milli and mega in another case are both offered") {
  CHECK(fault("5 MOHM", Unit::ohm) == "unknown unit \"MOHM\" in \"5 MOHM\" | write \"mohm\" or \"Mohm\"");
}

TEST_CASE("units that take no prefix refuse one") {
  for (const char* text : {"5 mppm", "5 kdegC", "5 m%", "5 kV/V"}) CHECK(fault(text).starts_with("unknown unit"));
}

TEST_CASE("a decimal comma is named, with the number as it should be") {
  CHECK(fault("1,5 V", Unit::volt) == "\"1,5 V\" has a decimal comma | write a decimal point, as in \"1.5 V\"");
  CHECK(fault("1,000,000 V", Unit::volt) == "\"1,000,000 V\" has a decimal comma | write the number without commas");
}

TEST_CASE("what is no number is refused, infinities and nan among it") {
  for (const char* text :
       {"", " ", "V", "nan", "nan V", "inf V", "-inf", "infinity V", "--5 V", "+-5 V", "ten V", ".", "- 5 V"})
    CHECK(fault(text) == "\"" + std::string(text) + "\" does not begin with a number");
}

TEST_CASE("a number beyond double's reach is refused, prefix included") {
  CHECK(fault("1e400 V") == "\"1e400 V\" is out of range");
  CHECK(fault("1e308 TV") == "\"1e308 TV\" is out of range");
  CHECK(fault("1e308 V") == "read");
}

TEST_CASE("rubbish behind number and unit is refused") {
  for (const char* text : {"5 V V", "5 V; 6 V", "5 V/", "0x10 V", "1e V", "5\tV", "1_000 V"}) {
    INFO(text);
    CHECK(fault(text).starts_with("unknown unit"));
  }
}

TEST_CASE("quantities are shown with an engineering prefix and no trailing zeros") {
  CHECK(format_quantity(-0.000412, Unit::volt) == "-412 uV");
  CHECK(format_quantity(103.4e-12, Unit::farad) == "103.4 pF");
  CHECK(format_quantity(0.0005, Unit::volt) == "500 uV");
  CHECK(format_quantity(4.99e3, Unit::ohm) == "4.99 kohm");
  CHECK(format_quantity(10e9, Unit::ohm) == "10 Gohm");
  CHECK(format_quantity(12, Unit::volt) == "12 V");
  CHECK(format_quantity(0, Unit::volt) == "0 V");
  CHECK(format_quantity(-0.0, Unit::volt) == "0 V");
  CHECK(format_quantity(42, Unit::count) == "42");
}

TEST_CASE("rounding never leaves a thousand before the prefix") {
  CHECK(format_quantity(999.96e-6, Unit::volt) == "1 mV");
  CHECK(format_quantity(999.94e-6, Unit::volt) == "999.9 uV");
  CHECK(format_quantity(999999, Unit::ohm) == "1 Mohm");
}

TEST_CASE("small ratios are shown in ppm, others plainly") {
  CHECK(format_quantity(20e-6, Unit::ratio) == "20 ppm");
  CHECK(format_quantity(0.001, Unit::ratio) == "1000 ppm");
  CHECK(format_quantity(99.987, Unit::ratio) == "99.99 V/V");
  CHECK(format_quantity(0.02, Unit::ratio) == "0.02 V/V");
}

TEST_CASE("units without prefixes are shown as they are") {
  CHECK(format_quantity(23.456, Unit::celsius) == "23.46 degC");
  CHECK(format_quantity(45.2, Unit::degree) == "45.2 deg");
}

TEST_CASE("no number is shown as none") {
  CHECK(format_quantity(std::numeric_limits<double>::quiet_NaN(), Unit::volt) == "none");
  CHECK(format_quantity(std::numeric_limits<double>::infinity(), Unit::volt) == "none");
}

TEST_CASE("a column takes its prefix from the limit") {
  CHECK(format_like(0.0000125, 0.0005, Unit::volt) == "12.5 uV");
  CHECK(format_like(0.0000125, 0.005, Unit::volt) == "0.013 mV");
  CHECK(format_like(0, 0.005, Unit::volt) == "0 mV");
  CHECK(format_like(0.05, 0.005, Unit::volt) == "50 mV");
}

TEST_CASE("every unit's symbol leads back to the unit") {
  for (int i = 0; i <= static_cast<int>(Unit::degree); ++i) {
    const Unit unit = static_cast<Unit>(i);
    const auto back = unit_of(symbol(unit));
    REQUIRE(back.ok());
    CHECK(back.value() == unit);
    CHECK_FALSE(quantity_name(unit).empty());
  }
  CHECK_FALSE(unit_of("furlong").ok());
}

TEST_CASE("what is shown reads back as it was, to the digits shown") {
  for (const double value : {1.234e-14, 5.6e-9, -3.3e-3, 47.11, 1.5e5, -9.99e11})
    for (const Unit unit : {Unit::volt, Unit::ohm, Unit::second}) {
      const std::string shown = format_quantity(value, unit, 6);
      INFO(shown);
      CHECK(read(shown, unit) == doctest::Approx(value).epsilon(1e-5));
    }
}
