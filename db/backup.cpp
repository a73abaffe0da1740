#include "db/backup.hpp"

#include <fcntl.h>
#include <fmt/format.h>
#include <sqlite3.h>
#include <sys/file.h>
#include <unistd.h>

#include <algorithm>
#include <cerrno>
#include <chrono>
#include <cstdlib>
#include <cstring>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <memory>

#include "db/free_space.hpp"
#include "db/journal.hpp"
#include "db/replay.hpp"
#include "db/schema.hpp"
#include "db/sqlite.hpp"
#include "db/station_lock.hpp"
#include "db/week.hpp"

namespace jigwright {
namespace {

namespace fs = std::filesystem;

constexpr int pages_a_step = 2000;
constexpr std::size_t digits = 6;

struct Closing {
  void operator()(sqlite3* handle) const { sqlite3_close_v2(handle); }
};
using Handle = std::unique_ptr<sqlite3, Closing>;

Error error_at(const std::string& path, const std::string& what, const std::string& to_do) {
  return {Error::Kind::store, what, path, to_do};
}

Error no_backup(const std::string& path, const std::string& why) {
  return error_at(path, "no backup was made: " + why, "check the backups' folder and its disk");
}

bool stopped(const std::atomic<bool>* stop) {
  return stop != nullptr && stop->load();
}

/// Files of a name of six digits and the rest, by number.
std::vector<std::string> numbered(const std::string& folder, bool (*wanted)(const std::string&)) {
  std::vector<std::string> out;
  std::error_code none;
  for (const auto& entry : fs::directory_iterator(folder, none)) {
    const std::string name = entry.path().filename().string();
    if (name.size() > digits && name.find_first_not_of("0123456789") == digits && wanted(name)) out.push_back(name);
  }
  std::sort(out.begin(), out.end());
  return out;
}

bool is_backup(const std::string& name) {
  return name.size() == digits + 22 && name[digits] == '-' && name.ends_with("Z.db");
}
bool is_copies(const std::string& name) {
  return name.substr(digits) == ".records";
}

std::int64_t number_of(const std::string& name) {
  return std::atoll(name.substr(0, digits).c_str());
}

std::string name_of(std::int64_t number, std::int64_t at_us) {
  std::string at = utc_text(at_us);
  std::erase(at, ':');
  return fmt::format("{:06}-{}.db", number, at);
}

void remove_store(const std::string& path) {
  std::error_code none;
  for (const char* beside : {"", "-wal", "-shm", "-journal"}) fs::remove(path + beside, none);
}

/// To the disk, and out of memory, so that reading it back reads the disk.
bool settle_file(const std::string& path) {
  const int file = ::open(path.c_str(), O_RDONLY | O_CLOEXEC);
  if (file < 0) return false;
  const bool synced = ::fsync(file) == 0;
  ::posix_fadvise(file, 0, 0, POSIX_FADV_DONTNEED);
  ::close(file);
  return synced;
}

Handle opened(const std::string& path, int flags) {
  sqlite3* handle = nullptr;
  sqlite3_open_v2(path.c_str(), &handle, flags, nullptr);
  return Handle(handle);
}

/// One reading of the store as it stands: what is recorded meanwhile waits in its log, and is not in the copy.
std::string copy_pages(const std::string& store, const std::string& to, const std::atomic<bool>* stop) {
  const Handle from = opened(store, SQLITE_OPEN_READONLY);
  const Handle into = opened(to, SQLITE_OPEN_READWRITE | SQLITE_OPEN_CREATE);
  sqlite3_busy_timeout(from.get(), 10'000);
  if (sqlite3_exec(from.get(), "BEGIN; SELECT count(*) FROM sqlite_schema", nullptr, nullptr, nullptr) != SQLITE_OK)
    return sqlite3_errmsg(from.get());
  sqlite3_backup* backup = sqlite3_backup_init(into.get(), "main", from.get(), "main");
  if (backup == nullptr) return sqlite3_errmsg(into.get());
  int code = SQLITE_OK;
  while (code == SQLITE_OK && !stopped(stop)) code = sqlite3_backup_step(backup, pages_a_step);
  sqlite3_backup_finish(backup);
  if (code != SQLITE_DONE) return stopped(stop) ? "it was stopped" : sqlite3_errstr(code);
  // A file of its own, without a log beside it, that also a disk which can only be read can give back.
  if (sqlite3_exec(into.get(), "PRAGMA journal_mode = DELETE", nullptr, nullptr, nullptr) != SQLITE_OK)
    return sqlite3_errmsg(into.get());
  return {};
}

int stop_wanted(void* stop) {
  return stopped(static_cast<const std::atomic<bool>*>(stop)) ? 1 : 0;
}

Result<AuditReport> audit_file(const std::string& path, const std::atomic<bool>* stop) {
  const auto copy = Database::open(path, Database::Access::read, false, 0);
  if (!copy) return copy.error();
  if (stop != nullptr)
    sqlite3_progress_handler(copy.value()->handle(), 100'000, stop_wanted, const_cast<std::atomic<bool>*>(stop));
  return audit(*copy.value());
}

/// One backup at a time is made in a folder, by whichever program.
class FolderLock {
 public:
  explicit FolderLock(const std::string& folder) : file_(::open(folder.c_str(), O_RDONLY | O_DIRECTORY | O_CLOEXEC)) {
    held_ = file_ >= 0 && ::flock(file_, LOCK_EX | LOCK_NB) == 0;
  }
  ~FolderLock() {
    if (file_ >= 0) ::close(file_);
  }
  FolderLock(const FolderLock&) = delete;
  FolderLock& operator=(const FolderLock&) = delete;
  bool held() const { return held_; }

 private:
  int file_;
  bool held_;
};

void let_go(const BackupPlan& plan) {
  const auto all = backups_in(plan.folder);
  const auto keep = static_cast<std::size_t>(std::max(1, plan.keep));
  if (all.size() <= keep) return;
  std::error_code none;
  const std::size_t gone = all.size() - keep;
  for (std::size_t i = 0; i < gone; ++i) fs::remove(plan.folder + "/" + all[i], none);
  for (const std::string& name : numbered(plan.folder, is_copies))
    if (number_of(name) < number_of(all[gone]) - 1) fs::remove(plan.folder + "/" + name, none);
}

std::string check_room(const std::string& store, const std::string& folder) {
  std::error_code none;
  const auto size = fs::file_size(store, none);
  const auto left = space_left_bytes(folder);
  if (none || !left || *left >= size + space_for_trial_bytes) return {};
  return fmt::format("it takes {:.1f} MB, and {:.1f} MB are left on its disk", static_cast<double>(size) / 1e6,
                     static_cast<double>(*left) / 1e6);
}

}  // namespace

std::vector<std::string> backups_in(const std::string& folder) {
  return numbered(folder, is_backup);
}

std::string copies_of(const std::string& backup) {
  return backup.substr(0, digits) + ".records";
}

std::vector<std::string> copies_since(const std::string& folder, const std::string& backup) {
  auto out = numbered(folder, is_copies);
  std::erase_if(out, [&](const std::string& name) { return number_of(name) < number_of(backup) - 1; });
  return out;
}

std::int64_t backup_time_us(const std::string& name) {
  tm at{};
  if (name.size() <= digits || ::strptime(name.c_str() + digits, "-%Y-%m-%dT%H%M%SZ", &at) == nullptr) return 0;
  return std::int64_t{::timegm(&at)} * 1'000'000;
}

bool backup_due(const BackupPlan& plan, std::int64_t now_us) {
  if (plan.folder.empty()) return false;
  const auto all = backups_in(plan.folder);
  if (all.empty()) return true;
  const std::int64_t age_us = now_us - backup_time_us(all.back());
  return age_us < -1'000'000 || age_us >= plan.every_s * 1'000'000;
}

Result<BackupMade> make_backup(const std::string& store, const BackupPlan& plan, std::int64_t now_us,
                               const std::atomic<bool>* stop) {
  std::error_code failed;
  fs::create_directories(plan.folder, failed);
  if (failed) return no_backup(plan.folder, failed.message());
  const FolderLock lock(plan.folder);
  if (!lock.held()) return no_backup(plan.folder, "another program is making one there now");
  if (const std::string room = check_room(store, plan.folder); !room.empty()) return no_backup(plan.folder, room);
  const auto before = backups_in(plan.folder);
  const std::string name = name_of(before.empty() ? 1 : number_of(before.back()) + 1, now_us);
  const std::string part = plan.folder + "/" + name + ".part";
  remove_store(part);
  std::string why = copy_pages(store, part, stop);
  if (why.empty() && !settle_file(part)) why = std::strerror(errno);
  if (!why.empty()) {
    remove_store(part);
    return no_backup(plan.folder, why);
  }
  BackupMade out;
  auto report = audit_file(part, stop);
  if (!report.ok() || stopped(stop)) {
    remove_store(part);
    return report.ok() ? no_backup(plan.folder, "it was stopped") : report.error();
  }
  out.audit = std::move(report.value());
  out.bytes = static_cast<std::int64_t>(fs::file_size(part, failed));
  if (!out.audit.whole()) {
    remove_store(part);
    return out;
  }
  out.path = plan.folder + "/" + name;
  fs::rename(part, out.path, failed);
  if (failed) return no_backup(plan.folder, failed.message());
  settle_file(plan.folder);
  let_go(plan);
  return out;
}

namespace {

std::string bytes_of(const std::string& path) {
  std::ifstream in(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), {}};
}

/// The newest backup that is whole, copied to `to`; empty when there is none.
std::string take_backup(const std::string& folder, const std::string& to, std::vector<std::string>& passed_over) {
  auto all = backups_in(folder);
  std::reverse(all.begin(), all.end());
  for (const std::string& name : all) {
    remove_store(to);
    std::error_code failed;
    fs::copy_file(folder + "/" + name, to, failed);
    if (!failed) fs::permissions(to, fs::perms::owner_write, fs::perm_options::add, failed);
    const auto report = failed ? Result<AuditReport>(no_backup(to, failed.message())) : audit_file(to, nullptr);
    if (report.ok() && report.value().whole()) return name;
    passed_over.push_back(name);
  }
  remove_store(to);
  return {};
}

CopySet copies(const std::string& folder, const std::string& backup, const std::string& store_uuid) {
  CopySet out;
  for (const std::string& name : copies_since(folder, backup)) {
    const std::string bytes = bytes_of(folder + "/" + name);
    if (const auto head = head_length(bytes, store_uuid)) read_frames(std::string_view(bytes).substr(*head), out);
  }
  return out;
}

using Heads = std::map<std::string, JournalHead>;  ///< by the station's uuid

Heads heads_of(Database& database) {
  Heads out;
  Query q = database.query("SELECT id, uuid FROM station");
  while (q.next()) out[q.text(1)] = journal_head(database, q.integer(0));
  return out;
}

/// How many records of the damaged store's chains are not in the restored one's; nullopt when it can't be read that
/// far.
std::optional<std::int64_t> lost_records(const std::string& damaged, const Heads& restored) {
  const auto old = Database::open(damaged, Database::Access::read, false, 0);
  if (!old) return std::nullopt;
  const Heads heads = heads_of(*old.value());
  if (old.value()->failed() || heads.empty()) return std::nullopt;
  std::int64_t out = 0;
  for (const auto& [uuid, head] : heads) {
    const auto found = restored.find(uuid);
    const JournalHead at = found == restored.end() ? JournalHead{head.epoch, 0, {}} : found->second;
    if (at.epoch != head.epoch) return std::nullopt;
    out += std::max<std::int64_t>(0, head.seq - at.seq);
  }
  return out;
}

/// Whoever drives a station would go on writing into the file that is set aside.
Result<Done> check_idle(const std::string& store, Database& restored) {
  Query q = restored.query("SELECT name FROM station");
  while (q.next())
    if (const auto lock = StationLock::take(store, q.text(0)); !lock) return lock.error();
  return Done{};
}

/// Renames the store and its log, so that they stay together. @return the new name; empty where nothing stood
Result<std::string> set_aside(const std::string& store, std::int64_t now_us) {
  std::error_code failed;
  if (!fs::exists(store, failed)) return std::string();
  std::string at = utc_text(now_us);
  std::erase(at, ':');
  const std::string first = store + ".damaged-" + at;
  std::string to = first;
  for (int i = 2; fs::exists(to, failed); ++i) to = fmt::format("{}.{}", first, i);
  for (const char* beside : {"", "-wal", "-shm"}) {
    if (!fs::exists(store + beside, failed)) continue;
    fs::rename(store + beside, to + beside, failed);
    if (failed)
      return error_at(store, "the damaged store can't be set aside: " + failed.message(),
                      "give yourself the right to write its folder");
  }
  return to;
}

/// Everything but the names of files: copies, new epochs, and an audit of what came of it.
Result<Done> rebuild(const std::string& path, const CopySet& copies, const std::string& store, const std::string& who,
                     std::int64_t now_us, Restored& out, Heads& heads) {
  const auto opened_store = Database::open(path, Database::Access::write, false, 0);
  if (!opened_store) return opened_store.error();
  Database& db = *opened_store.value();
  const auto layout = settle_schema(db, false, "");
  if (!layout) return layout.error();
  if (layout.value() != layout_version)
    return error_at(path, "this backup has an older layout", "open a copy of it with this program first");
  if (const auto idle = check_idle(store, db); !idle) return idle.error();
  UuidMaker uuids;
  auto replayed = replay(db, uuids, copies);
  if (!replayed) return replayed.error();
  out.added = replayed.value().added;
  out.gaps = std::move(replayed.value().gaps);
  heads = heads_of(db);
  {
    Transaction transaction(db, Transaction::Kind::write);
    std::vector<std::int64_t> stations;
    {
      Query q = db.query("SELECT id FROM station ORDER BY id");
      while (q.next()) stations.push_back(q.integer(0));
    }
    for (std::int64_t station : stations)
      begin_epoch(db, uuids, station, "restored from backup " + out.backup, who, now_us);
    if (const auto done = transaction.commit(); !done) return done.error();
  }
  const auto report = audit(db);
  if (!report) return report.error();
  if (!report.value().whole())
    return error_at(path, "the restored store is not whole: " + sentence(report.value().differences.front()),
                    "nothing was replaced; keep the backups as they are");
  out.heads = report.value().heads;
  db.script("PRAGMA journal_mode = WAL");
  return db.failed() ? Result<Done>(db.error()) : Result<Done>(Done{});
}

}  // namespace

Result<Restored> restore(const std::string& store, const std::string& folder, const std::string& who,
                         std::int64_t now_us) {
  Restored out;
  const std::string path = store + ".restoring";
  out.backup = take_backup(folder, path, out.passed_over);
  if (out.backup.empty())
    return error_at(folder, out.passed_over.empty() ? "there is no backup here" : "no backup here is whole",
                    "name the backups' folder with --from; nothing was changed");
  std::string uuid;
  if (const auto copy = Database::open(path, Database::Access::read, false, 0))
    if (Query q = copy.value()->query("SELECT value FROM meta WHERE key = 'store'"); q.next()) uuid = q.text(0);
  Heads heads;
  const auto built = rebuild(path, copies(folder, out.backup, uuid), store, who, now_us, out, heads);
  if (!built || !settle_file(path)) {
    remove_store(path);
    return built ? error_at(path, std::strerror(errno), "check the disk") : built.error();
  }
  if (fs::exists(store)) out.lost = lost_records(store, heads);
  const auto aside = set_aside(store, now_us);
  if (!aside) return aside.error();
  out.set_aside = aside.value();
  std::error_code failed;
  for (const char* beside : {"", "-wal", "-shm"})
    if (fs::exists(path + beside, failed)) fs::rename(path + beside, store + beside, failed);
  if (failed) return error_at(store, "the restored store can't be renamed: " + failed.message(), "it lies in " + path);
  return out;
}

}  // namespace jigwright
