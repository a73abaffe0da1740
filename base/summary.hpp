// Means, spreads, quantiles and straight lines, as both the steps and the limits need them. Pure; any thread.
#pragma once
#include <cstddef>
#include <optional>
#include <span>

namespace jigwright {

struct Summary {
  std::size_t n{0};
  double mean{0};
  double sd{0};  ///< n-1 in the denominator; 0 for n < 2
};

/// Two passes with the correction term of Chan, Golub and LeVeque, Am. Stat. 37 (1983) 242, eq. 1.7, summed with
/// compensation; checked against the NIST StRD univariate sets.
Summary summarize(std::span<const double> values);

/// Straight between the two values beside position (n - 1) p, counted from 0: definition 7 of Hyndman and Fan,
/// Am. Stat. 50 (1996) 361.
/// @param sorted  rising
/// @param p       0 = the least, 1 = the most
/// @return NaN for no values
double quantile(std::span<const double> sorted, double p);

/// Lag-1 autocorrelation: sum (y[i]-m)(y[i+1]-m) / sum (y[i]-m)^2 (NIST/SEMATECH e-Handbook 1.3.5.12).
/// nullopt for n < 2 or no spread.
std::optional<double> lag1(std::span<const double> values);

struct Line {
  double intercept{0};
  double slope{0};
  double u_slope{0};         ///< standard error from the residuals; 0 for n == 2
  double residual_sd{0};     ///< n-2 in the denominator; 0 for n == 2
  double worst_residual{0};  ///< the residual of largest size, with its sign
};

/// Ordinary least squares of y on x, centred first. nullopt for n < 2, unequal lengths, or x without spread.
std::optional<Line> fit_line(std::span<const double> x, std::span<const double> y);

}  // namespace jigwright
