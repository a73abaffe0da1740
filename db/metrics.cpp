#include "db/metrics.hpp"

#include <fmt/format.h>

#include <algorithm>

#include "base/nearest.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

constexpr std::size_t most_named = 12;

std::vector<KnownMetric> all_of(Database& database, const std::string& step, const std::string& name) {
  std::vector<KnownMetric> out;
  Query q =
      database.query("SELECT id, variant, unit, about FROM metric WHERE step = ? AND name = ? ORDER BY id", step, name);
  while (q.next()) {
    KnownMetric known{q.integer(0), {}};
    known.metric.name = {step, name, q.text(1)};
    if (const auto unit = unit_of(q.text(2))) known.metric.unit = unit.value();
    known.metric.about = static_cast<About>(q.integer(3));
    out.push_back(std::move(known));
  }
  return out;
}

std::vector<std::string> names(Query query) {
  std::vector<std::string> out;
  while (query.next()) out.push_back(query.text(0));
  return out;
}

/// The nearest, or else all of them if they are few.
Error unknown(Database& database, const std::string& what, const std::string& word, std::vector<std::string> known) {
  const auto near = nearest(word, known);
  std::string advice;
  if (near) advice = fmt::format("did you mean \"{}\"?", *near);
  if (!near && known.size() <= most_named) advice = fmt::format("known are {}", listed(known));
  return {Error::Kind::usage, what, database.path(), advice};
}

Error unknown_metric(Database& database, const std::string& step, const std::string& name) {
  std::vector<std::string> of_step =
      names(database.query("SELECT DISTINCT name FROM metric WHERE step = ? ORDER BY name", step));
  if (!of_step.empty())
    return unknown(database, fmt::format("step \"{}\" has no metric \"{}\"", step, name), name, std::move(of_step));
  return unknown(database, fmt::format("no finding of a step \"{}\" is on record", step), step,
                 names(database.query("SELECT DISTINCT step FROM metric ORDER BY step")));
}

}  // namespace

Result<std::vector<KnownMetric>> find_metrics(Database& database, const std::string& step, const std::string& name,
                                              const std::optional<std::string>& variant) {
  std::vector<KnownMetric> out = all_of(database, step, name);
  if (database.failed()) return database.error();
  if (out.empty()) return unknown_metric(database, step, name);
  if (!variant) return out;
  std::vector<std::string> variants;
  for (const KnownMetric& known : out) variants.push_back(known.metric.name.variant);
  std::erase_if(out, [&](const KnownMetric& known) { return known.metric.name.variant != *variant; });
  if (!out.empty()) return out;
  return unknown(database, fmt::format("{} has no variant \"{}\"", label({step, name, {}}), *variant), *variant,
                 std::move(variants));
}

}  // namespace jigwright
