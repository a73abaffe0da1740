// A load proved at the board's own pad: a tone through a known resistor R to OUT, whose level says how much capacitance
// stands there. Pure; any thread.
//
// With Ru from OUT to ground (the unpowered board) and C in parallel, Rp = R || Ru:
//     H = (Ru || 1/jwC) / (R + Ru || 1/jwC) = (Rp / R) / (1 + j w Rp C),   |H| = (Rp / R) / sqrt(1 + (w Rp C)^2).
// At a frequency where w Rp C is nothing the level alone gives Rp = R |H|; elsewhere the quotient q of that level over
// the level read gives C = sqrt(q^2 - 1) / (w Rp), in which an error of scale common to both levels cancels but for Rp.
// Our own derivation, from the voltage divider.
#pragma once

namespace jigwright {

struct ToneFacts {
  double amplitude_V{};  ///< peak, as set
  double tone_ohm{};     ///< R
  double of_level{};     ///< bound on the detector's error of reading, a ratio
  double of_setting{};   ///< bound on the tone's amplitude, a ratio
  double floor_V{};      ///< bound on what the detector reads of nothing
};

/// What the open output at the lowest tone says: Rp and its relative standard uncertainty.
struct ToneBase {
  bool usable{false};  ///< false when the level is within three times the detector's floor: nothing can be said
  double level_V{};
  double parallel_ohm{};
  double relative_u{};
};

struct Capacitance {
  double value_F{};
  double u_F{};
};

double parallel(double a_ohm, double b_ohm);

/// The level that the tone should have at the pad, V peak.
double tone_level(const ToneFacts& facts, double parallel_ohm, double capacitance_F, double frequency_Hz);

/// Where w Rp C is 2 (the level falls by sqrt 5, and C follows it well), kept within the jig's tone.
double tone_frequency(double parallel_ohm, double capacitance_F, double low_Hz, double high_Hz);

ToneBase tone_base(const ToneFacts& facts, double level_V);

/// The capacitance at the pad. Errors of two levels are taken as independent (the detector's and the tone's bounds
/// cover their flatness over frequency). A level above the base's is no capacitance: 0 F. A level within three times
/// the detector's floor says only "at least this much": its u is then not less than the value.
Capacitance tone_capacitance(const ToneFacts& facts, const ToneBase& base, double level_V, double frequency_Hz);

}  // namespace jigwright
