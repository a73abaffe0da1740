// The station: one computer with one jig, as station.toml describes it. One rule of precedence: a word on the command
// line goes before all; then the file that the environment's JIGWRIGHT_STATION names; then ./station.toml; then the
// built-in defaults below. The first file found is the only one read: files are never mixed. Plain data, any thread;
// reading does file input.
#pragma once
#include <memory>
#include <optional>
#include <string>

#include "base/source.hpp"
#include "base/toml.hpp"
#include "db/backup.hpp"

namespace jigwright {

struct StationFile {
  std::string name{"station"};
  std::string store{"results.db"};           ///< resolved against the file's folder
  std::string plan;                          ///< likewise; empty = the command names it
  std::string language{"en"};                ///< a language tag as in BCP 47: "en", "de-AT"
  std::string zone{"UTC"};                   ///< a zone of the IANA time zone database: "Europe/Vienna"
  BackupPlan backups;                        ///< of the store; its folder empty = none
  std::shared_ptr<const SourceText> source;  ///< empty = built-in defaults
};

/// The file in force: `named` by the command line, else by the environment (empty counts as unset), else ./station.toml
/// where there is one; empty = the built-in defaults.
std::string station_path(const std::string& named, const std::string& environment);

/// Reads the file in force, with the process's environment. nullopt when a fault was added: a file that is named but
/// can't be read is one.
std::optional<StationFile> read_station(const std::string& named, Faults& faults);

/// The file's tree. What comes back is usable only if no fault was added.
StationFile read_station_tree(const Node& root, Faults& faults);

}  // namespace jigwright
