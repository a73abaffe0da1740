// What each word of the command line does. main.cpp only reads the words; these print and return the exit code.
#pragma once
#include <cstdint>
#include <optional>
#include <string>
#include <utility>
#include <vector>

#include "db/backup.hpp"

namespace jigwright {

struct TryOptions {
  std::string plan;
  std::string serial;  ///< one board ...
  std::string order;   ///< ... or every board of an order
  std::string store;
  std::string station_name;
  std::string operator_name;
  std::string program;
  std::vector<std::string> faults;                           ///< of the simulated jig
  std::vector<std::pair<std::string, std::string>> answers;  ///< step, answer
  std::uint64_t seed{1};
  bool real_time{false};
  BackupPlan backups;
  bool json{false};
  bool quiet{false};
};
int try_boards(const TryOptions& options);

struct LineOptions {
  std::string plan, order, store, station_name, language, program;
  std::vector<std::string> faults;  ///< of the simulated jig
  std::uint64_t seed{1};
  BackupPlan backups;
  bool virtual_time{false};
};
int line(const LineOptions& options);

struct CardsOptions {
  std::string file, language;
};
int cards(const CardsOptions& options);

struct LintOptions {
  std::string plan;
  bool json{false};
  bool brief{false};  ///< the steps only, not every setting
};
int lint(const LintOptions& options);

/// The words that `try --fault` knows.
int list_faults();

struct EnterOptions {
  std::vector<std::string> files;
  std::string store, station_name, operator_name;
  BackupPlan backups;
};
int enter(const EnterOptions& options);

struct TraceOptions {
  std::string serial, reel, store;
  bool csv{false}, json{false};
};
int trace(const TraceOptions& options);

struct ShowOptions {
  std::string serial, store;
  bool csv{false}, json{false};
};
int show(const ShowOptions& options);

struct SpreadOptions {
  std::string step, metric, variant, store;
  bool one_variant{false};  ///< `variant` was given; it may be empty
  bool all_trials{false}, csv{false}, json{false};
};
int spread(const SpreadOptions& options);

struct AuditOptions {
  std::string store;
  bool json{false};
};
/// exit_store when something is not as recorded.
int audit(const AuditOptions& options);

struct LogOptions {
  std::string serial, store;
  std::int64_t last{0};  ///< 0 = 40, or all of a serial
  bool json{false};
};
int log(const LogOptions& options);

struct BackupOptions {
  std::string folder, store;  ///< folder empty = the station's
  BackupPlan backups;         ///< the station's
};
/// exit_store when the store is damaged.
int backup(const BackupOptions& options);

struct RestoreOptions {
  std::string folder, store, operator_name;  ///< folder empty = the station's
  BackupPlan backups;
};
/// exit_store when something is known to be missing.
int restore(const RestoreOptions& options);

struct ArchiveOptions {
  std::string file, before, store, station_name, operator_name;
};
int archive(const ArchiveOptions& options);

}  // namespace jigwright
