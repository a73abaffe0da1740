// A finding: a named metric reduced from readings, with unit and uncertainty. The plain record that steps make, limits
// judge and the store keeps. Any thread.
#pragma once
#include <cmath>
#include <cstdint>
#include <limits>
#include <optional>
#include <string>

#include "base/quantity.hpp"

namespace jigwright {

/// Who is at fault when the limit is missed: the board (NO-GO) or the jig, its contacts and instruments (VOID).
enum class About : std::uint8_t { board = 0, jig = 1 };

/// What became of a metric. Only `measured` carries a value that may meet a limit. Stored; never renumbered.
enum class FindingState : std::uint8_t {
  measured = 0,
  over_range = 1,   ///< the instrument reported overload
  not_settled = 2,  ///< never stable within the readings allowed
  no_data = 3,      ///< missing, refused, late or stale readings
  skipped = 4,      ///< the trial ended before it was read: no evidence
};

/// Names a metric for good: stable when load variants are added.
struct MetricName {
  std::string step;     ///< the step's id in the plan
  std::string name;     ///< "offset", "load_delta"
  std::string variant;  ///< "x100", "x100 at +5 V with 1 nF"; empty where there is only one
  bool operator==(const MetricName&) const = default;
};

/// "step: name (variant)", for people.
inline std::string label(const MetricName& m) {
  return m.step + ": " + m.name + (m.variant.empty() ? "" : " (" + m.variant + ")");
}

struct Metric {
  MetricName name;
  Unit unit{Unit::count};
  About about{About::board};
  double nominal{std::numeric_limits<double>::quiet_NaN()};  ///< NaN where the limit set must tell
  /// Bounds that the step itself states (a contact's resistance, a load's proof): in force where the limit set has no
  /// entry for the metric, so that the jig's own checks are always judged.
  std::optional<double> own_low, own_high;
};

struct Finding {
  int metric{-1};  ///< index in the trial's list of metrics
  double value{std::numeric_limits<double>::quiet_NaN()};
  double u{
      std::numeric_limits<double>::quiet_NaN()};  ///< standard uncertainty, k = 1, same unit; NaN if none can be stated
  int n{0};                                       ///< readings that the value rests on
  FindingState state{FindingState::no_data};
};

}  // namespace jigwright
