// How a metric's values spread, as a person or a program reads it: one variant in full, or a line a variant; CSV with a
// line a finding; one JSON document. Pure text; any thread.
#pragma once
#include <string>
#include <vector>

#include "db/spread.hpp"

namespace jigwright {

/// @param all_trials  as asked: retrials are among them
std::string render(const std::vector<Spread>& spreads, bool all_trials, bool json);

std::string spread_csv_header();
std::string spread_csv_line(const KnownMetric& metric, const SpreadRow& row);

}  // namespace jigwright
