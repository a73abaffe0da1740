// How one metric's values spread over the boards, for whoever sets its limits: read from column blocks, each answer in
// one short transaction. One thread.
#pragma once
#include <array>
#include <cstdint>
#include <functional>
#include <optional>
#include <string>
#include <vector>

#include "base/summary.hpp"
#include "db/metrics.hpp"
#include "limits/judge.hpp"
#include "limits/limit.hpp"

namespace jigwright {

class Database;

struct SpreadAsked {
  std::string step, name;
  std::optional<std::string> variant;  ///< none = each of them
  bool all_trials{false};              ///< else each board's first finding of the metric: no board counts twice
};

/// Shares of the measured values that lie below the quantiles in Spread: base/summary.hpp says how they are defined.
constexpr std::array<double, 9> spread_shares{0, 0.001, 0.01, 0.1, 0.5, 0.9, 0.99, 0.999, 1};

struct Spread {
  KnownMetric metric;
  std::int64_t findings{};
  std::int64_t measured{};  ///< of them, with a finite value: the quantiles, mean and deviation are of these
  std::int64_t missed{};    ///< of all of them, limits missed as judged then
  std::array<double, spread_shares.size()> quantiles{};  ///< NaN where nothing was measured
  Summary summary;
  std::optional<Limit> limit;  ///< in force in the latest trial with such a finding; none = recorded only. Bounds only
};

/// A line a variant, in the order in which they were first found.
/// @return errors of find_metrics(); Error kind store
Result<std::vector<Spread>> spread(Database& database, const SpreadAsked& asked);

struct SpreadRow {
  std::string serial;
  std::int64_t at_us{};  ///< begin of the trial
  double value{};        ///< NaN for none
  FindingState state{FindingState::no_data};
  Verdict verdict{Verdict::no_evidence};
};

/// Every finding that spread() speaks of, metric by metric and by rising trial, without keeping them all.
Result<Done> each_spread_row(Database& database, const SpreadAsked& asked,
                             const std::function<void(const KnownMetric&, const SpreadRow&)>& take);

}  // namespace jigwright
