// Quantities with units, as files write them ("103.4 pF", "0.5 mV", "20 ppm") and as people read them. SI base units
// inside. Prefixes after the SI brochure (9th ed., table 7): f p n u (or the micro sign) m k M G T; m and M are never
// confused. Plain functions; any thread.
#pragma once
#include <cstdint>
#include <string>
#include <string_view>

#include "base/error.hpp"

namespace jigwright {

/// Stored by its symbol, so the order may grow at the end only.
enum class Unit : std::uint8_t {
  count,  ///< no unit: a pure count
  volt,
  ampere,
  ohm,
  farad,
  second,
  hertz,
  kelvin,               ///< a temperature difference: "K"
  celsius,              ///< a temperature: "degC" or the degree sign and C
  ratio,                ///< "V/V", "ppm", "ppb", "%", all to a plain ratio
  volt_per_root_hertz,  ///< "V/rtHz"
  volt_per_second,      ///< "V/s"
  coulomb,
  joule,
  watt,
  metre,
  degree,  ///< of phase: "deg"
};

struct Quantity {
  double value{};
  Unit unit{Unit::count};
};

/// The SI symbol: "V", "ohm", "s", "V/V" ...; "" for count.
std::string_view symbol(Unit unit);

/// A unit from its symbol as stored (symbol()); Error kind file for an unknown one.
Result<Unit> unit_of(std::string_view symbol);

/// The unit's name for messages: "a voltage (V)", "a capacitance (F)".
std::string_view quantity_name(Unit unit);

/// Reads "NUMBER UNIT" (a space between is optional, decimal point only, locale-free, NR1 to NR3 alike).
/// Error kind file: what is wrong ("\"5\" has no unit", "unknown unit \"mV2\"") and what to write instead.
Result<Quantity> parse_quantity(std::string_view text);

/// As above, and the unit must be this one; the message names both.
Result<double> parse_quantity(std::string_view text, Unit unit);

/// "-0.412 mV", "103.4 pF", "20 ppm": engineering prefix, `significant` digits, trailing zeros kept off.
/// Ratios below 0.01 print in ppm, others plainly with "V/V". NaN and infinities print as "none".
std::string format_quantity(double value, Unit unit, int significant = 4);

/// As format_quantity, but with the prefix chosen for `scale` (a limit, say), so that a column reads alike: at most
/// `significant` - 1 decimals of that prefix.
std::string format_like(double value, double scale, Unit unit, int significant = 4);

}  // namespace jigwright
