#include "steps/uncertainty.hpp"

#include <doctest/doctest.h>

using namespace jigwright;

// JCGM 100:2008, 4.3.7 example 2 and 5.1.5 (from memory): a voltmeter of 14 ppm of reading + 2 ppm of its 1 V range,
// mean reading 0.928571 V with a scatter of 12 uV: the bound is 15 uV, its u 8.7 uV, both together 15 uV.
TEST_CASE("the GUM's voltmeter has its printed figures") {
  Accuracy range;
  range.range = 1;
  range.of_reading = 14e-6;
  range.of_range = 2e-6;
  CHECK(accuracy_bound(range, 0.928571) == doctest::Approx(15e-6).epsilon(0.005));
  CHECK(specified(range, 0.928571) == doctest::Approx(8.7e-6).epsilon(0.005));
  CHECK(Combined().add(12e-6).add(specified(range, 0.928571)).u() == doctest::Approx(15e-6).epsilon(0.02));
}

TEST_CASE("a rectangular bound of root three has a standard uncertainty of one") {
  CHECK(rectangular(1.7320508075688772) == doctest::Approx(1));
  CHECK(rectangular(-1.7320508075688772) == doctest::Approx(1));
}

// JCGM 100:2008, F.2.2.1 (from memory): u = 0.29 of the digit.
TEST_CASE("rounding hides 0.29 of a digit") {
  CHECK(rounding(1) == doctest::Approx(0.29).epsilon(0.005));
}

TEST_CASE("the scatter of a mean falls with the root of the readings") {
  CHECK(scatter(6e-6, 9, 0) == doctest::Approx(2e-6));
}

TEST_CASE("few readings that happen to agree are not believed below the meter's noise") {
  CHECK(scatter(0, 1, 4e-6) == doctest::Approx(4e-6));
  CHECK(scatter(1e-6, 4, 4e-6) == doctest::Approx(2e-6));
  CHECK(scatter(8e-6, 4, 4e-6) == doctest::Approx(4e-6));
  CHECK(scatter(1e-6, 25, 4e-6) == doctest::Approx(0.2e-6));
}

TEST_CASE("a sensitivity weighs its input") {
  CHECK(Combined().add(3, 1).add(2, 2).u() == doctest::Approx(5));
}

TEST_CASE("a difference on one range keeps of_reading of the difference alone") {
  Accuracy range;
  range.range = 10;
  range.of_reading = 50e-6;
  range.of_range = 100e-6;
  CHECK(specified_difference(range, -2e-3) == doctest::Approx(50e-6 * 2e-3 / 1.7320508075688772));
}
