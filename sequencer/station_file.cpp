#include "sequencer/station_file.hpp"

#include <sys/stat.h>

#include <algorithm>
#include <cctype>
#include <cmath>
#include <cstdlib>

namespace jigwright {
namespace {

constexpr const char* usual_file = "station.toml";

bool exists(const char* path) {
  struct stat status {};
  return ::stat(path, &status) == 0;
}

std::string resolved(const Node& root, const std::string& file) {
  if (file.empty() || file.starts_with('/') || !root.region.source) return file;
  const std::string& path = root.region.source->name;
  return path.substr(0, path.rfind('/') + 1) + file;
}

/// Letters and digits in groups, joined by one of `joints`.
bool grouped(const std::string& text, std::string_view joints) {
  bool joint = true;
  for (const char c : text) {
    const bool plain = std::isalnum(static_cast<unsigned char>(c)) != 0;
    const bool joins = joints.find(c) != std::string_view::npos;
    if (!plain && (!joins || joint)) return false;
    joint = joins;
  }
  return !joint;
}

std::string checked(TableReader& r, std::string_view key, std::string_view joints, std::string instead,
                    std::string advice) {
  const auto text = r.text(key);
  if (!text) return instead;
  if (grouped(text->value, joints)) return text->value;
  r.fault(text->region, "\"" + std::string(key) + "\": \"" + text->value + "\" can't be one", std::move(advice));
  return instead;
}

/// Advice in hours: whoever writes 24 does not mean seconds. @return seconds
std::int64_t read_every(const Node& every, TableReader& r, std::int64_t instead) {
  constexpr double shortest_s = 60, longest_s = 366 * 86'400.0;
  const char* advice = "write a time from 1 min to 8784 h with its unit in quotes, as in \"24 h\"";
  if (every.text() == nullptr) {
    r.fault(every.region, "\"every\": expected a time with its unit", advice);
    return instead;
  }
  const double every_s = r.need_positive("every", Unit::second).value;
  if (every_s > 0 && (every_s < shortest_s || every_s > longest_s))
    r.fault(every.region, "\"every\": \"" + *every.text() + "\" is too " + (every_s < shortest_s ? "short" : "long"),
            advice);
  return every_s < shortest_s || every_s > longest_s ? instead : std::llround(every_s);
}

void read_backups(const Node& table, Faults& faults, BackupPlan& out) {
  TableReader r(table, "[backups]", faults);
  out.folder = r.need_text("folder").value;
  if (r.has("every")) out.every_s = read_every(*find(*table.table(), "every"), r, out.every_s);
  if (const auto keep = r.integer("keep", 1, 1000)) out.keep = static_cast<int>(keep->value);
  r.finish();
}

}  // namespace

std::string station_path(const std::string& named, const std::string& environment) {
  if (!named.empty()) return named;
  if (!environment.empty()) return environment;
  return exists(usual_file) ? usual_file : "";
}

StationFile read_station_tree(const Node& root, Faults& faults) {
  StationFile station;
  station.source = root.region.source;
  TableReader file(root, "", faults);
  if (const Node* table = file.need_table("station")) {
    TableReader r(*table, "[station]", faults);
    station.name = r.need_text("name").value;
    if (r.has("store")) station.store = r.need_text("store").value;
    if (r.has("plan")) station.plan = r.need_text("plan").value;
    station.language = checked(r, "language", "-", station.language, "write a language tag, as in \"en\" or \"de-AT\"");
    station.zone = checked(r, "zone", "/_-+", station.zone, "write a time zone, as in \"UTC\" or \"Europe/Vienna\"");
    r.finish();
  }
  if (file.has("backups"))
    if (const Node* table = file.need_table("backups")) read_backups(*table, faults, station.backups);
  file.finish();
  station.store = resolved(root, station.store);
  station.plan = resolved(root, station.plan);
  station.backups.folder = resolved(root, station.backups.folder);
  return station;
}

std::optional<StationFile> read_station(const std::string& named, Faults& faults) {
  const char* environment = std::getenv("JIGWRIGHT_STATION");
  const std::string path = station_path(named, environment == nullptr ? "" : environment);
  if (path.empty()) return StationFile{};
  const std::size_t before = faults.count(Severity::fault);
  auto source = read_source(path);
  if (!source) {
    SourceText nameless;
    nameless.name = path;
    faults.fault({std::make_shared<const SourceText>(nameless), 0, 0, 1}, source.error().what,
                 named.empty() && environment != nullptr ? "the environment's JIGWRIGHT_STATION names it"
                                                         : source.error().to_do);
    return std::nullopt;
  }
  const auto root = parse_toml(source.value(), faults);
  if (!root) return std::nullopt;
  StationFile station = read_station_tree(*root, faults);
  if (faults.count(Severity::fault) != before) return std::nullopt;
  return station;
}

}  // namespace jigwright
