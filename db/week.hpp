// Dates as the store and its questions write them: ISO 8601 UTC times, ISO weeks, and the date codes on component
// labels. Pure; any thread.
#pragma once
#include <chrono>
#include <cstdint>
#include <string>
#include <string_view>

#include "base/error.hpp"

namespace jigwright {

/// "2026-01-09T12:00:00Z", whole seconds; `at_us` is UTC microseconds since 1970.
std::string utc_text(std::int64_t at_us);

/// An ISO 8601 week: week 1 is the one with the year's first Thursday.
struct Week {
  int year{};
  int number{};  ///< 1 .. 52 or 53
  auto operator<=>(const Week&) const = default;
};

Week week_of(std::chrono::sys_days day);
int weeks_in(int year);
std::string text(const Week& week);  ///< "2024-W31"

/// Reads a date code: YYWW as labels have it ("2431", years from 2000) or an ISO week ("2024-W31", "2024W31").
/// Error kind file: neither, no such week, or later than this week.
Result<Week> parse_date_code(std::string_view code, const Week& now);

}  // namespace jigwright
