#include "base/summary.hpp"

#include <doctest/doctest.h>

#include <algorithm>
#include <cmath>
#include <fstream>
#include <limits>
#include <string>
#include <vector>

using namespace jigwright;

namespace {

std::vector<double> numbers(const std::string& file) {
  std::ifstream in(std::string(TEST_DATA) + "/" + file);
  std::vector<double> out;
  for (double v; in >> v;) out.push_back(v);
  return out;
}

/// Decimal digits that agree: -log10 of the relative error; 15 at most, as certified values have no more.
double digits(double got, double certified) {
  if (got == certified) return 15;
  return std::min(15.0, -std::log10(std::abs(got - certified) / std::abs(certified)));
}

struct Certified {
  const char* set;
  std::size_t n;
  double mean, sd, lag1;
  /// What is demanded: a little less than the digits that are left when the data are rounded to double and then handled
  /// without any error (SD of NumAcc3 9.46, of Mavro 13.1; lag-1 of NumAcc3 12.2, of Mavro 13.9; the others 14.8 up).
  double mean_digits, sd_digits, lag1_digits;
};

}  // namespace

TEST_CASE("mean, standard deviation and lag-1 agree with the NIST StRD univariate sets as far as double allows") {
  const Certified sets[]{
      {"Lew", 200, -177.435, 277.332168044316, -0.307304800605679, 14.5, 14.5, 14},
      {"Mavro", 50, 2.001856, 0.000429123454003053, 0.937989183438248, 14.5, 13, 13.5},
      {"PiDigits", 5000, 4.5348, 2.86733906028871, -0.00355099287237972, 14.5, 14.5, 13},
      {"NumAcc1", 3, 10000002, 1, -0.5, 15, 15, 15},
      {"NumAcc2", 1001, 1.2, 0.1, -0.999, 14.5, 14.5, 14.5},
      {"NumAcc3", 1001, 1000000.2, 0.1, -0.999, 14.5, 9.4, 12},
  };
  for (const Certified& c : sets) {
    const auto values = numbers(std::string("nist_strd_univariate/") + c.set + ".dat");
    REQUIRE(values.size() == c.n);
    const Summary s = summarize(values);
    const auto lag = lag1(values);
    REQUIRE(lag.has_value());
    const double mean = digits(s.mean, c.mean);
    const double sd = digits(s.sd, c.sd);
    const double lag_digits = digits(*lag, c.lag1);
    MESSAGE(std::string(c.set), ": digits of mean ", mean, ", SD ", sd, ", lag-1 ", lag_digits);
    CHECK(mean >= c.mean_digits);
    CHECK(sd >= c.sd_digits);
    CHECK(lag_digits >= c.lag1_digits);
  }
}

TEST_CASE("the mean of values that differ in their last bits only is between them") {
  const std::vector<double> values{0.1, 0.1, std::nextafter(0.1, 1)};
  const Summary s = summarize(values);
  CHECK(s.mean >= 0.1);
  CHECK(s.mean <= std::nextafter(0.1, 1));
}

TEST_CASE("nothing, one value and equal values have no spread") {
  CHECK(summarize({}).n == 0);
  CHECK(summarize({}).sd == 0);
  const std::vector<double> one{3};
  CHECK(summarize(one).mean == 3);
  CHECK(summarize(one).sd == 0);
  const std::vector<double> equal{2, 2, 2};
  CHECK(summarize(equal).sd == 0);
  CHECK_FALSE(lag1(one).has_value());
  CHECK_FALSE(lag1(equal).has_value());
}

TEST_CASE("a value that is no number shows in the mean, never hides") {
  const std::vector<double> values{1, std::numeric_limits<double>::quiet_NaN(), 3};
  CHECK(std::isnan(summarize(values).mean));
  CHECK_FALSE(lag1(values).has_value());
}

TEST_CASE("the straight line agrees with the NIST StRD set Norris") {
  // NIST StRD linear regression, certified: intercept, slope, residual standard deviation, standard deviation of the
  // slope. The data, typed from memory, give these back in exact arithmetic.
  const auto pairs = numbers("nist_strd_linear/Norris.dat");
  REQUIRE(pairs.size() == 72);
  std::vector<double> x, y;
  for (std::size_t i = 0; i < pairs.size(); i += 2) {
    y.push_back(pairs[i]);
    x.push_back(pairs[i + 1]);
  }
  const auto line = fit_line(x, y);
  REQUIRE(line.has_value());
  MESSAGE("Norris: digits of slope ", digits(line->slope, 1.00211681802045), ", intercept ",
          digits(line->intercept, -0.262323073774029), ", residual SD ", digits(line->residual_sd, 0.884796396144373));
  CHECK(digits(line->slope, 1.00211681802045) >= 14);
  CHECK(digits(line->intercept, -0.262323073774029) >= 12);
  CHECK(digits(line->residual_sd, 0.884796396144373) >= 13);
  CHECK(digits(line->u_slope, 0.429796848199937e-3) >= 13);
}

TEST_CASE("the straight line agrees with Anscombe's quartet") {
  // F. J. Anscombe, Graphs in statistical analysis, The American Statistician 27 (1973) 17-21: all four sets give slope
  // 0.500 and intercept 3.00, to the digits printed there.
  const std::vector<double> x{10, 8, 13, 9, 11, 14, 6, 4, 12, 7, 5};
  const std::vector<double> x4{8, 8, 8, 8, 8, 8, 8, 19, 8, 8, 8};
  const std::vector<std::vector<double>> y{{8.04, 6.95, 7.58, 8.81, 8.33, 9.96, 7.24, 4.26, 10.84, 4.82, 5.68},
                                           {9.14, 8.14, 8.74, 8.77, 9.26, 8.10, 6.13, 3.10, 9.13, 7.26, 4.74},
                                           {7.46, 6.77, 12.74, 7.11, 7.81, 8.84, 6.08, 5.39, 8.15, 6.42, 5.73},
                                           {6.58, 5.76, 7.71, 8.84, 8.47, 7.04, 5.25, 12.50, 5.56, 7.91, 6.89}};
  for (std::size_t i = 0; i < y.size(); ++i) {
    const auto line = fit_line(i == 3 ? x4 : x, y[i]);
    REQUIRE(line.has_value());
    CHECK(std::abs(line->slope - 0.5) < 0.0005);
    CHECK(std::abs(line->intercept - 3.0) < 0.005);
  }
}

TEST_CASE("a small line by hand: slope, intercept, residuals") {
  // y = 1, 3, 4, 4 at x = 0, 1, 2, 3: slope 1, intercept 1.5, residuals -1/2, 1/2, 1/2, -1/2; sum of squares 1,
  // residual SD sqrt(1/2), its share of the slope sqrt(1/2)/sqrt(5).
  const std::vector<double> x{0, 1, 2, 3}, y{1, 3, 4, 4};
  const auto line = fit_line(x, y);
  REQUIRE(line.has_value());
  CHECK(line->slope == doctest::Approx(1).epsilon(1e-15));
  CHECK(line->intercept == doctest::Approx(1.5).epsilon(1e-15));
  CHECK(line->residual_sd == doctest::Approx(std::sqrt(0.5)).epsilon(1e-15));
  CHECK(line->u_slope == doctest::Approx(std::sqrt(0.1)).epsilon(1e-15));
  CHECK(std::abs(line->worst_residual) == doctest::Approx(0.5).epsilon(1e-15));
}

TEST_CASE("two points make a line without residuals; fewer, or a single x, make none") {
  const std::vector<double> x{1, 3}, y{2, 8};
  const auto line = fit_line(x, y);
  REQUIRE(line.has_value());
  CHECK(line->slope == 3);
  CHECK(line->residual_sd == 0);
  CHECK(line->u_slope == 0);
  const std::vector<double> one{1}, same{2, 2}, three{1, 2, 3};
  CHECK_FALSE(fit_line(one, one).has_value());
  CHECK_FALSE(fit_line(same, y).has_value());
  CHECK_FALSE(fit_line(three, y).has_value());
}

TEST_CASE("quantiles of the NIST handbook's twelve resistivities, by Hyndman and Fan's definition 7") {
  // Values: NIST/SEMATECH e-Handbook 7.2.6.2, in order. Position 1 + (n - 1) p, worked by hand: 90 % lies at 10.9,
  // 95.1937 + 0.9 x 0.0022; 10 % at 2.1, 95.0925 + 0.1 x 0.0140; the median at 6.5. (The handbook's own 95.1981 for 90
  // % is definition 6.)
  const std::vector<double> sorted{95.0610, 95.0925, 95.1065, 95.1195, 95.1442, 95.1567,
                                   95.1591, 95.1682, 95.1772, 95.1937, 95.1959, 95.1990};
  CHECK(quantile(sorted, 0.9) == doctest::Approx(95.19568).epsilon(1e-12));
  CHECK(quantile(sorted, 0.1) == doctest::Approx(95.0939).epsilon(1e-12));
  CHECK(quantile(sorted, 0.5) == doctest::Approx(95.1579).epsilon(1e-12));
  CHECK(quantile(sorted, 0) == 95.0610);
  CHECK(quantile(sorted, 1) == 95.1990);
}

TEST_CASE("a quantile of one value is that value, of none is none") {
  CHECK(quantile(std::vector<double>{3.5}, 0.999) == 3.5);
  CHECK(std::isnan(quantile(std::vector<double>{}, 0.5)));
}
