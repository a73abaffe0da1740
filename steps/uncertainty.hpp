// Standard uncertainties after the GUM (JCGM 100:2008): how a specification, a digit, scatter and shared errors become
// one number. All values are standard uncertainties (k = 1) unless named a bound. Pure; any thread.
//
// Of the accuracy of one meter range, both parts are errors that all its readings share: they stay whole in a mean, and
// in a difference only of_reading * |difference| is left (5.2.2 with r = 1). The parts of two different ranges are
// taken as independent.
#pragma once
#include <cmath>

#include "fixtures/jig.hpp"

namespace jigwright {

/// Bounds on the thermal EMF of the relays and probes between board and meter: the whole of it, what is left of it
/// after the path's zero has been subtracted within one trial, and the whole of it over the low-thermal relays of the
/// meter's zero and reference. Estimates; common practice, no source.
constexpr double path_emf_V = 60e-6;
constexpr double path_emf_drift_V = 2e-6;
constexpr double known_path_emf_V = 5e-6;

/// Combines independent parts: the root of the sum of squares (5.1.2, eq. 10).
class Combined {
 public:
  /// @param u            standard uncertainty of one input
  /// @param sensitivity  its partial derivative (5.1.3)
  Combined& add(double u, double sensitivity = 1) {
    squares_ += u * u * sensitivity * sensitivity;
    return *this;
  }
  double u() const { return std::sqrt(squares_); }

 private:
  double squares_{0};
};

/// A value that lies anywhere within +-bound alike: bound / sqrt 3 (4.3.7).
double rectangular(double bound);

/// What the last digit hides: step / sqrt 12 (F.2.2.1).
double rounding(double step);

/// Of the mean of n readings: s / sqrt n (4.2.3). Fewer than five readings say little about their own scatter (4.3.2,
/// note): then at least `noise`, the meter's stated noise of one reading, stands for s.
double scatter(double sd, int n, double noise);

/// Bound on the error of a reading: of_reading * |reading| + of_range * range.
double accuracy_bound(const Accuracy& range, double reading);

/// Of a reading or a mean of readings, from the specification alone.
inline double specified(const Accuracy& range, double reading) {
  return rectangular(accuracy_bound(range, reading));
}

/// Of a difference of two readings on one range, from the specification alone: their shared offset cancels (5.2.2).
inline double specified_difference(const Accuracy& range, double difference) {
  return rectangular(range.of_reading * std::abs(difference));
}

}  // namespace jigwright
