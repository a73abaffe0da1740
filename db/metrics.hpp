// The metrics that a store has findings of, by name. Plain rows; one thread, inside a transaction.
#pragma once
#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "base/finding.hpp"

namespace jigwright {

class Database;

struct KnownMetric {
  std::int64_t id{};
  Metric metric;  ///< name, unit, about
};

/// Every metric of that step and name, in the order in which they were first found.
/// @param variant  none = all of them
/// @return at least one; Error kind usage for a step, metric or variant that is not known, with the nearest one
Result<std::vector<KnownMetric>> find_metrics(Database& database, const std::string& step, const std::string& name,
                                              const std::optional<std::string>& variant);

}  // namespace jigwright
