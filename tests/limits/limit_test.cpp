#include "limits/limit.hpp"

#include <doctest/doctest.h>

#include <array>
#include <cmath>

using namespace jigwright;

namespace {

const double no_number = std::numeric_limits<double>::quiet_NaN();
const double infinite = std::numeric_limits<double>::infinity();

Limit offset_limit(double U) {
  Limit limit;
  limit.specification = {-0.5e-3, 0.5e-3};
  limit.nominal = 0;
  limit.budget_U = U;
  return limit;
}

std::string fault_of(const Limit& limit, Unit unit = Unit::volt) {
  const auto got = apply_guard(limit, unit);
  return got ? "none" : got.error().what;
}

}  // namespace

TEST_CASE("guarded acceptance takes the whole budgeted uncertainty off each bound") {
  // JCGM 106:2012 8.3.2 (A_U = T_U - w, A_L = T_L + w) with w = U.
  const auto got = apply_guard(offset_limit(20e-6), Unit::volt);
  REQUIRE(got.ok());
  CHECK(*got.value().applied.low == doctest::Approx(-480e-6));
  CHECK(*got.value().applied.high == doctest::Approx(480e-6));
  CHECK(got.value().width == doctest::Approx(20e-6));
  CHECK(*got.value().specification.high == 0.5e-3);
}

TEST_CASE("a board that reads exactly the test limit is non-conforming with the risk that the share stands for") {
  // Shares and risks: ISO 14253-1 (0.83 U) and ILAC-G8:09/2019 (U, 1.5 U) as tabulated there; recomputed to more
  // digits: 4.846 %, 2.275 %, 0.135 %. Normal distribution, u = U/2.
  struct Row {
    double share, risk;
  };
  for (const Row row : {Row{0.83, 0.04846}, Row{1, 0.02275}, Row{1.5, 0.00135}}) {
    Limit limit = offset_limit(50e-6);
    limit.share = row.share;
    const auto got = apply_guard(limit, Unit::volt);
    REQUIRE(got.ok());
    const double u = 25e-6;
    const double z = (*got.value().specification.high - *got.value().applied.high) / u;
    CHECK(std::erfc(z / std::sqrt(2.0)) / 2 == doctest::Approx(row.risk).epsilon(0.001));
  }
}

TEST_CASE("without a guard band the test limit is the specification") {
  Limit limit = offset_limit(20e-6);
  limit.guard = Guard::none;
  const auto got = apply_guard(limit, Unit::volt);
  REQUIRE(got.ok());
  CHECK(*got.value().applied.low == -0.5e-3);
  CHECK(*got.value().applied.high == 0.5e-3);
  CHECK(got.value().width == 0);
}

TEST_CASE("a fixed inset moves both bounds inwards by its amount") {
  Limit limit = offset_limit(20e-6);
  limit.guard = Guard::inset;
  limit.width = 0.1e-3;
  const auto got = apply_guard(limit, Unit::volt);
  REQUIRE(got.ok());
  CHECK(*got.value().applied.low == doctest::Approx(-0.4e-3));
  CHECK(*got.value().applied.high == doctest::Approx(0.4e-3));
}

TEST_CASE("typed test limits are taken as they stand, and the larger inset is the width") {
  Limit limit = offset_limit(20e-6);
  limit.guard = Guard::typed;
  limit.applied = {-0.4e-3, 0.3e-3};
  const auto got = apply_guard(limit, Unit::volt);
  REQUIRE(got.ok());
  CHECK(*got.value().applied.high == 0.3e-3);
  CHECK(got.value().width == doctest::Approx(0.2e-3));
}

TEST_CASE("a budget that grows with the reading guards as wide as it is at the larger bound") {
  // 0.5 mV + 2 % of 5 mV is 0.6 mV.
  Limit limit;
  limit.specification.high = 5e-3;
  limit.budget_U = 0.5e-3;
  limit.budget_of_reading = 0.02;
  const auto got = apply_guard(limit, Unit::volt);
  REQUIRE(got.ok());
  CHECK(*got.value().applied.high == doctest::Approx(4.4e-3));
  CHECK(budget_at(limit, -10) == doctest::Approx(0.2005));
}

TEST_CASE("a one-sided specification is guarded on its own side only") {
  Limit limit;
  limit.specification.high = 5e-3;
  limit.budget_U = 0.5e-3;
  const auto got = apply_guard(limit, Unit::volt);
  REQUIRE(got.ok());
  CHECK_FALSE(got.value().applied.low);
  CHECK(*got.value().applied.high == doctest::Approx(4.5e-3));
  CHECK(std::isnan(got.value().nominal));
}

TEST_CASE("a silent nominal is the middle of a two-sided specification") {
  Limit limit = offset_limit(0);
  limit.specification = {9.9, 10.3};
  limit.nominal = no_number;
  const auto got = apply_guard(limit, Unit::volt);
  REQUIRE(got.ok());
  CHECK(got.value().nominal == doctest::Approx(10.1));
}

TEST_CASE("a guard band that leaves no room is a fault that names both figures") {
  CHECK(fault_of(offset_limit(0.5e-3)) == "the jig is too uncertain for this specification: U = 500 uV, room = 1 mV");
  CHECK(fault_of(offset_limit(0.49e-3)) == "none");
  Limit limit = offset_limit(0);
  limit.guard = Guard::inset;
  limit.width = 0.6e-3;
  CHECK(fault_of(limit) == "the inset of 600 uV at each bound leaves nothing of the specification's room of 1 mV");
}

TEST_CASE("typed test limits outside the specification, crossed or one-sided are faults") {
  Limit limit = offset_limit(0);
  limit.guard = Guard::typed;
  limit.applied = {-0.4e-3, 0.6e-3};
  CHECK(fault_of(limit) == "the typed test limit's high 600 uV lies outside the specification's 500 uV");
  limit.applied = {-0.6e-3, 0.4e-3};
  CHECK(fault_of(limit) == "the typed test limit's low -600 uV lies outside the specification's -500 uV");
  limit.applied = {0.4e-3, -0.4e-3};
  CHECK(fault_of(limit) == "the test limit's low 400 uV is not below its high -400 uV");
  limit.applied = {std::nullopt, 0.4e-3};
  CHECK(fault_of(limit) == "the specification has a low bound, the typed test limit has none");
}

TEST_CASE("a typed bound exactly on the specification is allowed") {
  Limit limit = offset_limit(0);
  limit.guard = Guard::typed;
  limit.applied = limit.specification;
  CHECK(fault_of(limit) == "none");
}

TEST_CASE("a specification without sense is a fault") {
  Limit limit = offset_limit(0);
  limit.specification = {};
  CHECK(fault_of(limit) == "the specification has no bound");
  limit.specification = {1e-3, -1e-3};
  CHECK(fault_of(limit) == "low 1 mV is not below high -1 mV");
  limit.specification = {1e-3, 1e-3};
  CHECK(fault_of(limit) == "low 1 mV is not below high 1 mV");
  limit.specification = {no_number, 1e-3};
  CHECK(fault_of(limit) == "a bound of the specification is no number");
  limit.specification = {-1e-3, infinite};
  CHECK(fault_of(limit) == "a bound of the specification is no number");
}

TEST_CASE("a negative budget, a negative inset, a share beyond three and a nominal outside are faults") {
  CHECK(fault_of(offset_limit(-1e-6)) == "the budgeted uncertainty is below zero");
  CHECK(fault_of(offset_limit(no_number)) == "the budgeted uncertainty is below zero");
  Limit limit = offset_limit(1e-6);
  limit.share = 3.5;
  CHECK(fault_of(limit) == "the share of the uncertainty is not from 0 to 3");
  limit = offset_limit(0);
  limit.guard = Guard::inset;
  limit.width = -1e-6;
  CHECK(fault_of(limit) == "the inset -1 uV would widen the specification");
  limit = offset_limit(0);
  limit.nominal = 1;
  CHECK(fault_of(limit) == "the nominal 1 V lies outside the specification");
}

TEST_CASE("margin is 1 at nominal, 0 on either bound, negative beyond") {
  const Limit limit = apply_guard(offset_limit(20e-6), Unit::volt).value();
  CHECK(margin(limit, 0) == 1);
  CHECK(margin(limit, *limit.applied.high) == 0);
  CHECK(margin(limit, *limit.applied.low) == 0);
  CHECK(margin(limit, 240e-6) == doctest::Approx(0.5));
  CHECK(margin(limit, -240e-6) == doctest::Approx(0.5));
  CHECK(margin(limit, 960e-6) == doctest::Approx(-1));
}

TEST_CASE("margin with a nominal off the middle is a share of the nearer room") {
  Limit limit;
  limit.specification = limit.applied = {0.0, 10.0};
  limit.nominal = 2;
  CHECK(margin(limit, 1) == doctest::Approx(0.5));
  CHECK(margin(limit, 6) == doctest::Approx(0.5));
}

TEST_CASE("margin of a one-sided limit without nominal is in shares of the bound") {
  Limit limit;
  limit.specification = limit.applied = {150.0, std::nullopt};
  CHECK(margin(limit, 300) == doctest::Approx(1));
  CHECK(margin(limit, 150) == 0);
  CHECK(margin(limit, 75) == doctest::Approx(-0.5));
}

TEST_CASE("margin to a bound of zero is in guard widths") {
  Limit limit;
  limit.applied.low = 0;
  limit.width = 0.2;
  CHECK(margin(limit, 0.1) == doctest::Approx(0.5));
  limit.width = 0;
  CHECK(margin(limit, 0.1) == 1);
  CHECK(margin(limit, 0) == 0);
  CHECK(margin(limit, -0.1) == -1);
}

TEST_CASE("margin of no number, or against no bound, is no number") {
  const Limit limit = apply_guard(offset_limit(20e-6), Unit::volt).value();
  CHECK(std::isnan(margin(limit, no_number)));
  CHECK(std::isnan(margin(limit, infinite)));
  CHECK(std::isnan(margin(Limit{}, 1)));
}
