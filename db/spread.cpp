#include "db/spread.hpp"

#include <algorithm>
#include <cmath>

#include "db/columns.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

/// Whether an earlier trial of the board found the metric too. A first trial needs no look.
bool found_before(Database& database, std::int64_t metric, std::int64_t trial) {
  return database
      .first(
          "SELECT 1 FROM trial t CROSS JOIN trial e ON e.board = t.board AND e.id < t.id CROSS JOIN finding f ON "
          "f.trial = e.id AND f.metric = ? WHERE t.id = ? LIMIT 1",
          metric, trial)
      .has_value();
}

/// Which findings an answer speaks of: places in the columns.
std::vector<std::size_t> asked_for(Database& database, std::int64_t metric, const MetricColumns& columns,
                                   bool all_trials) {
  std::vector<std::size_t> out;
  for (std::size_t i = 0; i < columns.trials.size(); ++i)
    if (all_trials || columns.firsts[i] != 0 || !found_before(database, metric, columns.trials[i])) out.push_back(i);
  return out;
}

std::optional<Limit> limit_in(Database& database, std::int64_t trial, std::int64_t metric) {
  Query q = database.query(
      "SELECT l.low, l.high, l.spec_low, l.spec_high FROM trial t JOIN applied_limit l ON l.applied = t.applied AND "
      "l.metric = ? WHERE t.id = ?",
      metric, trial);
  if (!q.next()) return std::nullopt;
  Limit out;
  out.applied = {q.maybe_real(0), q.maybe_real(1)};
  out.specification = {q.maybe_real(2), q.maybe_real(3)};
  return out;
}

/// Counts, and the values measured, sorted.
std::vector<double> tally(const MetricColumns& columns, const std::vector<std::size_t>& places, Spread& out) {
  std::vector<double> values;
  out.findings = static_cast<std::int64_t>(places.size());
  for (const std::size_t i : places) {
    out.missed += columns.verdicts[i] == Verdict::missed ? 1 : 0;
    if (columns.states[i] == FindingState::measured && std::isfinite(columns.values[i]))
      values.push_back(columns.values[i]);
  }
  std::sort(values.begin(), values.end());
  return values;
}

Spread spread_of(Database& database, const KnownMetric& metric, const MetricColumns& columns, bool all_trials) {
  Spread out;
  out.metric = metric;
  const std::vector<std::size_t> places = asked_for(database, metric.id, columns, all_trials);
  const std::vector<double> values = tally(columns, places, out);
  out.measured = static_cast<std::int64_t>(values.size());
  std::transform(spread_shares.begin(), spread_shares.end(), out.quantiles.begin(),
                 [&](double share) { return quantile(values, share); });
  out.summary = summarize(values);
  if (!columns.trials.empty()) out.limit = limit_in(database, columns.trials.back(), metric.id);
  return out;
}

}  // namespace

Result<std::vector<Spread>> spread(Database& database, const SpreadAsked& asked) {
  Transaction reading(database, Transaction::Kind::read);
  const auto metrics = find_metrics(database, asked.step, asked.name, asked.variant);
  if (!metrics) return metrics.error();
  std::vector<Spread> out;
  for (const KnownMetric& metric : metrics.value()) {
    const auto columns = read_columns(database, metric.id);
    if (!columns) return columns.error();
    out.push_back(spread_of(database, metric, columns.value(), asked.all_trials));
  }
  return database.result(std::move(out));
}

Result<Done> each_spread_row(Database& database, const SpreadAsked& asked,
                             const std::function<void(const KnownMetric&, const SpreadRow&)>& take) {
  Transaction reading(database, Transaction::Kind::read);
  const auto metrics = find_metrics(database, asked.step, asked.name, asked.variant);
  if (!metrics) return metrics.error();
  for (const KnownMetric& metric : metrics.value()) {
    const auto read = read_columns(database, metric.id);
    if (!read) return read.error();
    const MetricColumns& columns = read.value();
    for (const std::size_t i : asked_for(database, metric.id, columns, asked.all_trials)) {
      Query q = database.query("SELECT b.serial, t.at_us FROM trial t JOIN board b ON b.id = t.board WHERE t.id = ?",
                               columns.trials[i]);
      if (!q.next()) continue;
      take(metric, {q.text(0), q.integer(1), columns.values[i], columns.states[i], columns.verdicts[i]});
    }
  }
  return database.result(Done{});
}

}  // namespace jigwright
