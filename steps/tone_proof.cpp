#include "steps/tone_proof.hpp"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>

#include "steps/uncertainty.hpp"

namespace jigwright {
namespace {

constexpr double doubtful_floors = 3;

double relative_level_u(const ToneFacts& facts, double level_V) {
  return Combined()
      .add(rectangular(facts.of_level))
      .add(rectangular(facts.of_setting))
      .add(rectangular(facts.floor_V / level_V))
      .u();
}

double angular(double frequency_Hz) {
  return 2 * std::numbers::pi * frequency_Hz;
}

/// u of sqrt(q^2 - 1) for a relative u of q; where the root nears 0 the tangent says nothing, and the root of the
/// square's own uncertainty stands instead.
double root_u(double q, double relative_u) {
  const double x = std::sqrt(std::max(q * q - 1, 0.0));
  const double flat = q * std::sqrt(2 * relative_u);
  return x > 0 ? std::min(q * q * relative_u / x, flat) : flat;
}

}  // namespace

double parallel(double a_ohm, double b_ohm) {
  return a_ohm * b_ohm / (a_ohm + b_ohm);
}

double tone_level(const ToneFacts& facts, double parallel_ohm, double capacitance_F, double frequency_Hz) {
  const double x = angular(frequency_Hz) * parallel_ohm * capacitance_F;
  return facts.amplitude_V * parallel_ohm / facts.tone_ohm / std::sqrt(1 + x * x);
}

double tone_frequency(double parallel_ohm, double capacitance_F, double low_Hz, double high_Hz) {
  const double at_Hz = 2 / (2 * std::numbers::pi * parallel_ohm * capacitance_F);
  return std::max(low_Hz, std::min(at_Hz, high_Hz));
}

ToneBase tone_base(const ToneFacts& facts, double level_V) {
  ToneBase base;
  base.usable = level_V > doubtful_floors * facts.floor_V && facts.amplitude_V > 0;
  if (!base.usable) return base;
  base.level_V = level_V;
  base.parallel_ohm = facts.tone_ohm * std::min(level_V / facts.amplitude_V, 1.0);
  base.relative_u = relative_level_u(facts, level_V);
  return base;
}

Capacitance tone_capacitance(const ToneFacts& facts, const ToneBase& base, double level_V, double frequency_Hz) {
  const double nan = std::numeric_limits<double>::quiet_NaN();
  if (!base.usable || !(level_V > 0) || !(frequency_Hz > 0)) return {nan, nan};
  const double q = std::max(base.level_V / level_V, 1.0);
  const double x = std::sqrt(q * q - 1);
  const double scale_F = 1 / (angular(frequency_Hz) * base.parallel_ohm);
  // C goes as sqrt(V0^2/V^2 - 1) / V0: of V0's error the quotient's part less Rp's is left, 1 / (q^2 - 1) of it.
  Combined u;
  u.add(root_u(q, relative_level_u(facts, level_V)));
  u.add(std::min(root_u(q, base.relative_u), x > 0 ? base.relative_u / x : root_u(q, base.relative_u)));
  Capacitance c{x * scale_F, u.u() * scale_F};
  if (level_V < doubtful_floors * facts.floor_V) c.u_F = std::max(c.u_F, c.value_F);
  return c;
}

}  // namespace jigwright
