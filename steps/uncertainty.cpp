#include "steps/uncertainty.hpp"

#include <algorithm>

namespace jigwright {
namespace {
const double root_3 = std::sqrt(3.0);
const double root_12 = std::sqrt(12.0);
}  // namespace

double rectangular(double bound) {
  return std::abs(bound) / root_3;
}

double rounding(double step) {
  return std::abs(step) / root_12;
}

double scatter(double sd, int n, double noise) {
  if (n < 1) return std::numeric_limits<double>::infinity();
  const double s = n < 5 ? std::max(sd, noise) : sd;
  return s / std::sqrt(static_cast<double>(n));
}

double accuracy_bound(const Accuracy& range, double reading) {
  return range.of_reading * std::abs(reading) + range.of_range * range.range;
}

}  // namespace jigwright
