// Values, limits and margins in words, the same wherever a person reads them. Never a NaN. Pure; any thread.
#pragma once
#include <string>
#include <string_view>

#include "base/finding.hpp"
#include "limits/limit.hpp"

namespace jigwright {

/// "-140 uV", "99.9892 V/V", "over range", "not read": as many digits as the uncertainty leaves (two digits of U).
std::string value_text(const Finding& finding, Unit unit);

/// "measured", "over range", "not settled", "no data", "skipped": as CSV and JSON name it.
std::string_view state_word(FindingState state);

/// Expanded uncertainty, k = 2, two digits: "12 uV"; empty where none is stated.
std::string uncertainty_text(const Finding& finding, Unit unit);

/// The test limit: "-480 uV to 480 uV", "at most 4.4 mV", "at least 150 ohm"; empty where there is none.
std::string bounds_text(const Limit* limit, Unit unit);

/// "71 %", "-12 %"; far beyond the limit "below -999 %"; empty for none.
std::string margin_text(double margin);

}  // namespace jigwright
