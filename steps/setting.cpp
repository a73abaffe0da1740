#include "steps/setting.hpp"

#include <algorithm>
#include <cmath>

namespace jigwright {
namespace {

bool usable(const Reading& reading) {
  return reading.state == ReadingState::ok && std::isfinite(reading.value);
}

Next decide_fixed(const Fixed& rule, std::size_t taken) {
  return taken >= static_cast<std::size_t>(std::max(rule.n, 1)) ? Next::enough : Next::more;
}

bool stable(const Stable& rule, std::span<const Reading> readings) {
  const auto window = static_cast<std::size_t>(std::max(rule.window, 1));
  if (readings.size() < window) return false;
  const auto last = readings.last(window);
  const auto [low, high] = std::minmax_element(last.begin(), last.end(),
                                               [](const Reading& a, const Reading& b) { return a.value < b.value; });
  return high->value - low->value <= rule.tolerance;
}

Next decide_stable(const Stable& rule, std::span<const Reading> readings) {
  if (stable(rule, readings)) return Next::enough;
  return readings.size() >= static_cast<std::size_t>(std::max(rule.max, 1)) ? Next::gave_up : Next::more;
}

}  // namespace

Next decide(const StopRule& rule, std::span<const Reading> readings) {
  for (const Reading& reading : readings) {
    if (reading.state == ReadingState::overload) return Next::enough;
    if (!usable(reading)) return Next::gave_up;
  }
  if (const auto* fixed = std::get_if<Fixed>(&rule)) return decide_fixed(*fixed, readings.size());
  return decide_stable(std::get<Stable>(rule), readings);
}

int most_readings(const StopRule& rule) {
  if (const auto* fixed = std::get_if<Fixed>(&rule)) return std::max(fixed->n, 1);
  return std::max(std::get<Stable>(rule).max, 1);
}

}  // namespace jigwright
