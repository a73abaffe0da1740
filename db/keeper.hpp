// Looks after a store while a line works: copies of each new record, a backup when one is due, and through that
// backup's audit the check of the whole store. The backup runs on a thread of its own and reads only; everything else
// happens in the caller's calls, on the store's thread.
#pragma once
#include <atomic>
#include <chrono>
#include <cstdint>
#include <memory>
#include <mutex>
#include <optional>
#include <string>
#include <thread>
#include <vector>

#include "db/backup.hpp"
#include "db/copying.hpp"

namespace jigwright {

class Keeper {
 public:
  Keeper(Database& database, BackupPlan plan)
      : database_(database), plan_(std::move(plan)), copies_(database, plan_.folder) {}
  ~Keeper();  ///< stops a backup under way
  Keeper(const Keeper&) = delete;
  Keeper& operator=(const Keeper&) = delete;

  /// Copies what is new, and begins a backup when one is due. What fails becomes news, once until it succeeds or fails
  /// otherwise, and is tried again later.
  void tend(std::int64_t now_us);
  /// Waits for a backup under way.
  void finish();

  /// The store is damaged, as the last backup's audit or the copying found; empty = nothing is known against it.
  std::optional<Error> damage() const;
  /// What a person should know, each thing once.
  std::vector<std::string> take_news();

 private:
  void begin_backup(std::int64_t now_us);
  void copy();
  void end_backup(const Result<BackupMade>& made);
  void tell(std::string news);
  void damaged(const Error& how);

  Database& database_;
  BackupPlan plan_;
  RecordCopies copies_;
  std::string copies_failed_;  ///< told of last; empty = they did not
  std::thread thread_;
  std::atomic<bool> stop_{false}, running_{false};
  using Time = std::chrono::steady_clock::time_point;
  std::optional<Time> not_before_;         ///< of the next backup, after one that failed
  std::optional<Time> copies_not_before_;  ///< likewise of copies, whose folder is then read anew
  mutable std::mutex mutex_;               ///< guards the next three
  std::string backup_failed_;              ///< told of last; empty = it did not
  std::vector<std::string> news_;
  std::optional<Error> damage_;
};

}  // namespace jigwright
