#include "station/words.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>

namespace jigwright {
namespace {

int leading_place(double value) {
  return static_cast<int>(std::floor(std::log10(std::abs(value))));
}

/// Significant digits down to the second digit of the expanded uncertainty.
int digits(const Finding& f) {
  const double U = 2 * f.u;
  if (!(U > 0) || !std::isfinite(U) || f.value == 0) return 4;
  return std::clamp(leading_place(f.value) - leading_place(U) + 2, 2, 7);
}

}  // namespace

std::string value_text(const Finding& finding, Unit unit) {
  switch (finding.state) {
    case FindingState::measured:
      return format_quantity(finding.value, unit, digits(finding));
    case FindingState::over_range:
      return "over range";
    case FindingState::not_settled:
      return "never settled";
    case FindingState::no_data:
      return "no reading";
    case FindingState::skipped:
      break;
  }
  return "not read";
}

std::string_view state_word(FindingState state) {
  static constexpr std::array<std::string_view, 5> words{"measured", "over range", "not settled", "no data", "skipped"};
  return words[static_cast<std::size_t>(state)];
}

std::string uncertainty_text(const Finding& finding, Unit unit) {
  const double U = 2 * finding.u;
  if (!std::isfinite(U)) return "";
  // A ratio keeps its value's own unit: 0.0071 V/V beside 99.9892 V/V; ppm only where that would be all zeros.
  return unit == Unit::ratio && U >= 1e-4 ? fmt::format("{:.2g} V/V", U) : format_quantity(U, unit, 2);
}

std::string bounds_text(const Limit* limit, Unit unit) {
  if (limit == nullptr) return "";
  const auto& [low, high] = limit->applied;
  const int digits = unit == Unit::ratio ? 6 : 4;
  if (low && high) {
    const double scale = std::max(std::abs(*low), std::abs(*high));
    return fmt::format("{} to {}", format_like(*low, scale, unit, digits), format_like(*high, scale, unit, digits));
  }
  if (low) return fmt::format("at least {}", format_quantity(*low, unit, digits));
  if (high) return fmt::format("at most {}", format_quantity(*high, unit, digits));
  return "";
}

std::string margin_text(double margin) {
  if (!std::isfinite(margin)) return "";
  if (margin < -9.99) return "below -999 %";
  return fmt::format("{:.0f} %", 100 * margin);
}

}  // namespace jigwright
