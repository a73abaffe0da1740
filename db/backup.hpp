// Backups of a live store, in a folder of their own. "000012-2026-12-01T160209Z.db" is a whole store, copied while the
// line works on, then read back and audited before it bears that name; "000012.records" holds copies of the records
// made while it was the newest (copying.hpp). Numbers tell the order, whatever the clock did. restore() makes a store
// again from the newest backup that is whole and the copies. Because a copy is audited from end to end, making it is
// also the check of the live store, without a long reading of it. Any thread; one call at a time for a folder.
#pragma once
#include <atomic>
#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "base/error.hpp"
#include "db/audit.hpp"

namespace jigwright {

struct BackupPlan {
  std::string folder;  ///< empty = no backups
  std::int64_t every_s{24 * 3600};
  int keep{7};  ///< newest backups that stay
};

struct BackupMade {
  std::string path;  ///< empty = the store is damaged, and no backup was made of it
  AuditReport audit;
  std::int64_t bytes{};
};

/// Names of backups in the folder, oldest first; a folder that is not there has none.
std::vector<std::string> backups_in(const std::string& folder);
/// Files of copies that may hold records made since the backup of that name, oldest first: from the file before its own
/// on, for the time that the copy was being read back.
std::vector<std::string> copies_since(const std::string& folder, const std::string& backup);
/// Name of the file of copies that is written while this backup is the newest.
std::string copies_of(const std::string& backup);
/// When the backup of that name was begun, UTC microseconds.
std::int64_t backup_time_us(const std::string& name);

/// Whether the next backup is due: there is none, the newest is older than plan.every_s, or from the future.
bool backup_due(const BackupPlan& plan, std::int64_t now_us);

/// Copies, reads back, audits, names, and lets go of the oldest. The folder is made when it is missing.
/// @param stop  set by another thread: gives up soon, leaving nothing behind
/// @return Error kind store: the folder or its disk, or stopped
Result<BackupMade> make_backup(const std::string& store, const BackupPlan& plan, std::int64_t now_us,
                               const std::atomic<bool>* stop = nullptr);

struct Restored {
  std::string backup;                    ///< its name
  std::vector<std::string> passed_over;  ///< newer backups that were not whole
  std::int64_t added{};                  ///< records from copies
  std::string set_aside;                 ///< where the damaged store lies now; empty = there was none
  std::optional<std::int64_t> lost;  ///< records that the damaged store had and that are gone; empty = can't be told
  std::vector<std::string> gaps;     ///< copies that could not be used to their end, and why: by file or station
  std::vector<std::string> foreign;  ///< files of copies there that are of another store: passed over
  std::vector<ChainHead> heads;      ///< of the new epochs
};

/// Makes the store anew at `store`, beside which whatever stood there is set aside. Each station's chain goes on in a
/// new epoch. The restored store is audited before it gets its name. Nobody drives a station meanwhile.
/// @return Error kind store: a station is driven, no whole backup, backups of another store, no room; what stood there
/// is then untouched
Result<Restored> restore(const std::string& store, const std::string& folder, const std::string& who,
                         std::int64_t now_us);

}  // namespace jigwright
