// The store: one SQLite file with every trial, board, reel and feed. It records trials for the sequencer, takes in
// orders, boards, reels and feeds, and answers questions. Owned by the program's main function; one thread at a time.
// A process that only asks opens it for reading: its transactions are short and never block the line.
#pragma once
#include <map>
#include <memory>
#include <string>

#include "db/backup.hpp"
#include "db/columns.hpp"
#include "db/enter.hpp"
#include "db/questions.hpp"
#include "db/station_lock.hpp"
#include "db/trial_log.hpp"

namespace jigwright {

class Keeper;
class TrialWriter;

struct StoreOptions {
  enum class Access { read, write };
  Access access{Access::write};
  bool create{true};    ///< make the file when it is missing or empty; only for writing
  int busy_ms{10'000};  ///< how long to wait for another writer
  BackupPlan backups;   ///< of a process that tries boards
};

class Store final : public TrialLog {
 public:
  /// Error kind store: missing, not a store, of a newer program, not permitted; the file is then unchanged. A store of
  /// an older layout is brought up to date first, whatever the access, and notice() says so.
  static Result<std::unique_ptr<Store>> open(const std::string& path, const StoreOptions& options = {});
  ~Store() override;
  Store(const Store&) = delete;
  Store& operator=(const Store&) = delete;

  /// What opening did that a person should know; empty = nothing.
  const std::string& notice() const { return notice_; }

  /// The first of a station also takes it for this process, looks whether the end of its chain is as recorded, and
  /// gives trials that were cut short their record. Error kind store: another program drives the station, the store is
  /// damaged, its disk is nearly full.
  Result<OpenTrial> begin_trial(const TrialStart& start) override;
  /// That first part alone, before a board is there.
  Result<Done> take_station(const std::string& station);
  Result<Done> finish_trial(const OpenTrial& open, const TrialEnd& end) override;

  /// Copies of records, a backup on a thread of its own when one is due, and column blocks that are missing, a few at a
  /// time (columns.hpp); blocks that could not be built are tried later.
  void upkeep() override;
  /// Waits for a backup under way, and copies the last records: before the program ends.
  void finish_upkeep();
  /// What a person should know of backups since the last call.
  std::vector<std::string> take_news();

  /// Takes lists of boards, reels and feeds in, all files or none: see enter.hpp.
  Result<std::vector<EnteredFile>> enter(const std::vector<std::shared_ptr<const SourceText>>& sources,
                                         std::int64_t now_us, Faults& faults, const EnteredBy& by = {});

  /// Questions: see questions.hpp.
  Result<SerialTrace> trace_serial(const std::string& serial);
  Result<ReelTrace> trace_reel(const std::string& reel);
  Result<BoardShown> show(const std::string& serial);

  /// For db/'s own files and their tests.
  Database& database() { return *database_; }
  UuidMaker& uuids() { return uuids_; }

 private:
  Store(std::unique_ptr<Database> database, const BackupPlan& backups);
  Result<Done> drive(const std::string& station, std::int64_t now_us);
  static Result<std::unique_ptr<Store>> reopened(const std::string& path, StoreOptions options);

  std::string notice_;
  std::map<std::string, StationLock> driven_;
  UuidMaker uuids_;
  std::unique_ptr<Database> database_;
  std::unique_ptr<TrialWriter> writer_;
  ColumnKeeper columns_;
  std::unique_ptr<Keeper> keeper_;
};

}  // namespace jigwright
