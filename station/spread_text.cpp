#include "station/spread_text.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <nlohmann/json.hpp>

#include "db/week.hpp"
#include "station/tables.hpp"
#include "station/words.hpp"

namespace jigwright {
namespace {

using Json = nlohmann::ordered_json;

/// Indexes of spread_shares that a line a variant shows.
constexpr std::size_t least = 0, one_percent = 2, median = 4, ninety_nine_percent = 6, most = 8;

std::string share_name(std::size_t i) {
  if (i == least) return "least";
  if (i == most) return "most";
  return i == median ? "median" : fmt::format("{} %", 100 * spread_shares[i]);
}

/// Values of one spread alike, with so many digits that three of the deviation are seen.
std::string value_text(const Spread& s, double value) {
  const double scale = std::max(std::abs(s.quantiles[least]), std::abs(s.quantiles[most]));
  int digits = 4;
  if (s.summary.sd > 0 && scale > 0)
    digits += static_cast<int>(std::floor(std::log10(scale)) - std::floor(std::log10(s.summary.sd))) - 1;
  return format_like(value, scale, s.metric.metric.unit, std::clamp(digits, 4, 10));
}

std::string deviation_text(const Spread& s) {
  if (s.measured < 2) return "none";
  const Unit unit = s.metric.metric.unit;
  const bool plain = unit == Unit::ratio && s.summary.sd >= 0.01;  // as the values beside it, not in ppm
  return plain ? fmt::format("{:.3g} V/V", s.summary.sd) : format_quantity(s.summary.sd, unit, 3);
}
std::string mean_text(const Spread& s) {
  return s.measured < 1 ? "none" : value_text(s, s.summary.mean);
}
std::string limit_text(const Spread& s) {
  return bounds_text(s.limit ? &*s.limit : nullptr, s.metric.metric.unit);
}
std::string count_text(const Spread& s, bool all_trials) {
  const char* plural = s.findings == 1 ? "" : "s";
  return all_trials ? fmt::format("every finding of {} trial{}", s.findings, plural)
                    : fmt::format("first findings of {} board{}", s.findings, plural);
}

std::string in_full(const Spread& s, bool all_trials) {
  std::string out = printable(fmt::format("{}: {}: {} measured, {} not, {} missed.", label(s.metric.metric.name),
                                          count_text(s, all_trials), s.measured, s.findings - s.measured, s.missed)) +
                    "\n";
  auto line = [&](const std::string& name, const std::string& text) {
    out += fmt::format("  {:<10} {}\n", name, text);
  };
  for (std::size_t i = 0; i < spread_shares.size(); ++i) line(share_name(i), value_text(s, s.quantiles[i]));
  line("mean", mean_text(s));
  line("deviation", deviation_text(s));
  line("test limit", s.limit ? limit_text(s) + ", in the latest trial" : "none in the latest trial");
  return out;
}

Cells line_of(const Spread& s) {
  return {s.metric.metric.name.variant,
          std::to_string(s.findings),
          std::to_string(s.findings - s.measured),
          std::to_string(s.missed),
          value_text(s, s.quantiles[least]),
          value_text(s, s.quantiles[one_percent]),
          value_text(s, s.quantiles[median]),
          value_text(s, s.quantiles[ninety_nine_percent]),
          value_text(s, s.quantiles[most]),
          mean_text(s),
          deviation_text(s),
          limit_text(s)};
}

std::string by_variant(const std::vector<Spread>& spreads, bool all_trials) {
  const MetricName& name = spreads[0].metric.metric.name;
  std::string out = printable(fmt::format("{}: {}, {}. Name a variant for more of it.", name.step, name.name,
                                          all_trials ? "every finding" : "each board's first finding")) +
                    "\n";
  TextTable table({"variant", "findings", "not measured", "missed", "least", "1 %", "median", "99 %", "most", "mean",
                   "deviation", "test limit"},
                  {false, true, true, true, true, true, true, true, true, true, true, false});
  for (const Spread& s : spreads) table.add(line_of(s));
  return out + table.text();
}

Json number(double value) {
  return std::isfinite(value) ? Json(value) : Json(nullptr);
}
Json maybe(const std::optional<double>& value) {
  return value ? Json(*value) : Json(nullptr);
}

Json json_of(const Spread& s) {
  Json out;
  out["variant"] = s.metric.metric.name.variant.empty() ? Json(nullptr) : Json(s.metric.metric.name.variant);
  out["unit"] = symbol(s.metric.metric.unit);
  out["findings"] = s.findings;
  out["measured"] = s.measured;
  out["missed"] = s.missed;
  out["quantiles"] = Json::array();
  for (std::size_t i = 0; i < spread_shares.size(); ++i)
    out["quantiles"].push_back(Json{{"share", spread_shares[i]}, {"value", number(s.quantiles[i])}});
  out["mean"] = s.measured < 1 ? Json(nullptr) : number(s.summary.mean);
  out["sd"] = s.measured < 2 ? Json(nullptr) : number(s.summary.sd);
  const Limit limit = s.limit.value_or(Limit{});
  out["low"] = maybe(limit.applied.low);
  out["high"] = maybe(limit.applied.high);
  out["spec_low"] = maybe(limit.specification.low);
  out["spec_high"] = maybe(limit.specification.high);
  return out;
}

std::string json_text(const std::vector<Spread>& spreads, bool all_trials) {
  Json out;
  out["step"] = spreads[0].metric.metric.name.step;
  out["metric"] = spreads[0].metric.metric.name.name;
  out["of"] = all_trials ? "every trial" : "first findings";
  out["variants"] = Json::array();
  for (const Spread& s : spreads) out["variants"].push_back(json_of(s));
  return out.dump(2, ' ', false, Json::error_handler_t::replace) + "\n";
}

}  // namespace

std::string render(const std::vector<Spread>& spreads, bool all_trials, bool json) {
  if (json) return json_text(spreads, all_trials);
  return spreads.size() == 1 ? in_full(spreads[0], all_trials) : by_variant(spreads, all_trials);
}

std::string spread_csv_header() {
  return csv_line({"serial", "at", "step", "metric", "variant", "value", "unit", "state", "verdict"});
}

std::string spread_csv_line(const KnownMetric& metric, const SpreadRow& row) {
  const MetricName& name = metric.metric.name;
  return csv_line({row.serial, utc_text(row.at_us), name.step, name.name, name.variant, csv_number(row.value),
                   std::string(symbol(metric.metric.unit)), std::string(state_word(row.state)),
                   std::string(word(row.verdict))});
}

}  // namespace jigwright
