#include "station/words.hpp"

#include <doctest/doctest.h>

#include <limits>

using namespace jigwright;

namespace {

Finding measured(double value, double u) {
  Finding f;
  f.value = value;
  f.u = u;
  f.state = FindingState::measured;
  return f;
}

}  // namespace

TEST_CASE("a value is shown down to the second digit of its expanded uncertainty") {
  CHECK(value_text(measured(-140.39e-6, 6e-6), Unit::volt) == "-140 uV");
  CHECK(value_text(measured(3.94357, 0.023), Unit::volt) == "3.944 V");
  CHECK(value_text(measured(99.98921, 0.00353), Unit::ratio) == "99.9892 V/V");
  CHECK(value_text(measured(1.0225e-6, 10e-9), Unit::farad) == "1.022 uF");
}

TEST_CASE("without an uncertainty four digits are shown, and without a value its state") {
  CHECK(value_text(measured(1.234567, std::numeric_limits<double>::quiet_NaN()), Unit::second) == "1.235 s");
  for (const FindingState state :
       {FindingState::over_range, FindingState::not_settled, FindingState::no_data, FindingState::skipped}) {
    Finding f;
    f.state = state;
    CHECK(value_text(f, Unit::volt).find("nan") == std::string::npos);
    CHECK_FALSE(value_text(f, Unit::volt).empty());
  }
}

TEST_CASE("the uncertainty of a gain is in the gain's own unit") {
  CHECK(uncertainty_text(measured(99.9892, 0.0036), Unit::ratio) == "0.0072 V/V");
  CHECK(uncertainty_text(measured(1e-3, 6e-6), Unit::volt) == "12 uV");
}

TEST_CASE("a margin far beyond the limit is no long number") {
  CHECK(margin_text(0.708) == "71 %");
  CHECK(margin_text(-0.12) == "-12 %");
  CHECK(margin_text(-875.3) == "below -999 %");
  CHECK(margin_text(std::numeric_limits<double>::quiet_NaN()).empty());
}

TEST_CASE("bounds read at one scale") {
  Limit limit;
  limit.applied = {-0.48e-3, 0.48e-3};
  CHECK(bounds_text(&limit, Unit::volt) == "-480 uV to 480 uV");
  limit.applied = {std::nullopt, 4.4e-3};
  CHECK(bounds_text(&limit, Unit::volt) == "at most 4.4 mV");
  limit.applied = {99.93, 100.07};
  CHECK(bounds_text(&limit, Unit::ratio) == "99.93 V/V to 100.07 V/V");
  CHECK(bounds_text(nullptr, Unit::volt).empty());
}
