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
  std::error_code failed;
  for (fs::directory_iterator at(folder, failed), end; !failed && at != end; at.increment(failed)) {
    const std::string name = at->path().filename().string();
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
/// Of a backup whose program ended before it was done.
bool is_part(const std::string& name) {
  return name[digits] == '-' && name.find("Z.db.part") != std::string::npos;
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

struct Copied {
  bool store_damaged{false};
  std::string why;  ///< it failed; empty = it did not
};

Copied failed_to_read(sqlite3* store) {
  const int code = sqlite3_errcode(store) & 0xff;
  return {code == SQLITE_CORRUPT || code == SQLITE_NOTADB, sqlite3_errmsg(store)};
}

/// One reading of the store as it stands: what is recorded meanwhile waits in its log, and is not in the copy.
Copied copy_pages(const std::string& store, const std::string& to, const std::atomic<bool>* stop) {
  const Handle from = opened(store, SQLITE_OPEN_READONLY);
  const Handle into = opened(to, SQLITE_OPEN_READWRITE | SQLITE_OPEN_CREATE);
  if (from == nullptr || into == nullptr) return {false, "out of memory"};
  sqlite3_busy_timeout(from.get(), 10'000);
  if (sqlite3_exec(from.get(), "BEGIN; SELECT count(*) FROM sqlite_schema", nullptr, nullptr, nullptr) != SQLITE_OK)
    return failed_to_read(from.get());
  sqlite3_backup* backup = sqlite3_backup_init(into.get(), "main", from.get(), "main");
  if (backup == nullptr) return {false, sqlite3_errmsg(into.get())};
  int code = SQLITE_OK;
  while (code == SQLITE_OK && !stopped(stop)) code = sqlite3_backup_step(backup, pages_a_step);
  sqlite3_backup_finish(backup);
  if (code != SQLITE_DONE) return {false, stopped(stop) ? "it was stopped" : sqlite3_errstr(code)};
  // A file of its own, without a log beside it, that also a disk which can only be read can give back.
  if (sqlite3_exec(into.get(), "PRAGMA journal_mode = DELETE", nullptr, nullptr, nullptr) != SQLITE_OK)
    return {false, sqlite3_errmsg(into.get())};
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

/// What an audit says, or that the file could not be audited.
AuditReport report_of(const std::string& path, const std::atomic<bool>* stop) {
  auto report = audit_file(path, stop);
  if (report) return std::move(report.value());
  AuditReport out;
  out.found = 1;
  out.differences.push_back({report.error().what, {}, {}, {}, 0, 0});
  return out;
}

/// Bytes; empty when the file is no store.
std::string store_uuid(const std::string& path) {
  const auto store = Database::open(path, Database::Access::read, false, 0);
  if (!store) return {};
  Query q = store.value()->query("SELECT value FROM meta WHERE key = 'store'");
  return q.next() ? q.text(0) : std::string();
}

/// One backup at a time is made in a folder, by whichever program.
class FolderLock {
 public:
  explicit FolderLock(const std::string& folder) : file_(::open(folder.c_str(), O_RDONLY | O_DIRECTORY | O_CLOEXEC)) {
    if (file_ < 0) {
      reason_ = std::strerror(errno);
    } else if (::flock(file_, LOCK_EX | LOCK_NB) != 0 && errno == EWOULDBLOCK) {  // else: a disk without locks
      reason_ = "another program is making one there now";
    }
  }
  ~FolderLock() {
    if (file_ >= 0) ::close(file_);
  }
  FolderLock(const FolderLock&) = delete;
  FolderLock& operator=(const FolderLock&) = delete;
  const std::string& reason() const { return reason_; }  ///< empty = it is held

 private:
  int file_;
  std::string reason_;
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

namespace {

/// Why no backup of this store can go there; empty = one can.
std::string hindrance(const std::string& store, const std::string& folder) {
  const auto before = backups_in(folder);
  const std::string there = before.empty() ? std::string() : store_uuid(folder + "/" + before.back());
  const std::string ours = store_uuid(store);
  if (!there.empty() && !ours.empty() && there != ours)
    return "the backups there are of another store; give each store a folder of its own";
  return check_room(store, folder);
}

/// A copy that is not whole: is it the store, or the disk that the copy lies on?
Result<BackupMade> doubtful(const std::string& store, const std::string& folder, BackupMade copied,
                            const std::atomic<bool>* stop) {
  AuditReport itself = report_of(store, stop);
  if (stopped(stop)) return no_backup(folder, "it was stopped");
  if (itself.whole())
    return error_at(folder,
                    "no backup was made: the copy does not read back as it was written: " +
                        sentence(copied.audit.differences.front()),
                    "the store is whole; replace the disk of the backups' folder");
  copied.audit = std::move(itself);
  return copied;
}

Result<BackupMade> copied_and_read(const std::string& store, const std::string& folder, const std::string& part,
                                   const std::atomic<bool>* stop) {
  Copied copied = copy_pages(store, part, stop);
  if (copied.why.empty() && !settle_file(part)) copied.why = std::strerror(errno);
  if (!copied.why.empty() && !copied.store_damaged) return no_backup(folder, copied.why);
  BackupMade out;
  out.audit = report_of(copied.store_damaged ? store : part, stop);
  if (stopped(stop)) return no_backup(folder, "it was stopped");
  if (!out.audit.whole()) return doubtful(store, folder, std::move(out), stop);
  std::error_code none;
  out.bytes = static_cast<std::int64_t>(fs::file_size(part, none));
  return out;
}

}  // namespace

Result<BackupMade> make_backup(const std::string& store, const BackupPlan& plan, std::int64_t now_us,
                               const std::atomic<bool>* stop) {
  std::error_code failed;
  fs::create_directories(plan.folder, failed);
  if (failed) return no_backup(plan.folder, failed.message());
  const FolderLock lock(plan.folder);
  if (!lock.reason().empty()) return no_backup(plan.folder, lock.reason());
  for (const std::string& name : numbered(plan.folder, is_part)) fs::remove(plan.folder + "/" + name, failed);
  if (const std::string why = hindrance(store, plan.folder); !why.empty()) return no_backup(plan.folder, why);
  const auto before = backups_in(plan.folder);
  const std::string name = name_of(before.empty() ? 1 : number_of(before.back()) + 1, now_us);
  const std::string part = plan.folder + "/" + name + ".part";
  auto made = copied_and_read(store, plan.folder, part, stop);
  if (!made || !made.value().audit.whole()) {
    remove_store(part);
    return made;
  }
  made.value().path = plan.folder + "/" + name;
  fs::rename(part, made.value().path, failed);
  if (failed) {
    remove_store(part);
    return no_backup(plan.folder, failed.message());
  }
  settle_file(plan.folder);
  let_go(plan);
  return made;
}

namespace {

std::string bytes_of(const std::string& path) {
  std::ifstream in(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), {}};
}

/// The newest backup that is whole; empty when there is none.
std::string newest_whole(const std::string& folder, std::vector<std::string>& passed_over) {
  auto all = backups_in(folder);
  std::reverse(all.begin(), all.end());
  for (const std::string& name : all) {
    if (report_of(folder + "/" + name, nullptr).whole()) return name;
    passed_over.push_back(name);
  }
  return {};
}

/// 0 = no store.
std::int64_t layout_of(const std::string& path) {
  const auto store = Database::open(path, Database::Access::read, false, 0);
  return store ? store.value()->first("PRAGMA user_version").value_or(0) : 0;
}

/// The newest backup that can be opened is of this layout: one of another is no damaged one.
Result<Done> check_layout(const std::string& folder) {
  auto all = backups_in(folder);
  std::int64_t layout = 0;
  while (!all.empty() && (layout = layout_of(folder + "/" + all.back())) == 0) all.pop_back();
  if (all.empty() || layout == layout_version) return Done{};
  const std::string newest = folder + "/" + all.back();
  if (layout > layout_version)
    return error_at(newest, fmt::format("a newer program made this backup (layout {})", layout),
                    "restore with that program; nothing was changed");
  return error_at(newest, fmt::format("an older program made this backup (layout {})", layout),
                  "put a copy of it where the store stood, and run \"jigwright audit\", which brings it up to date; "
                  "nothing was changed");
}

Result<Done> take_backup(const std::string& from, const std::string& to) {
  const auto nothing_changed = [&](const std::string& why) {
    remove_store(to);
    return error_at(to, "the backup can't be copied: " + why, "nothing was changed; see to this disk, then repeat");
  };
  remove_store(to);
  std::error_code failed;
  const std::string folder = fs::absolute(to, failed).parent_path().string();
  if (const std::string room = check_room(from, folder); !room.empty()) return nothing_changed(room);
  fs::copy_file(from, to, failed);
  if (!failed) fs::permissions(to, fs::perms::owner_write, fs::perm_options::add, failed);
  if (failed) return nothing_changed(failed.message());
  return Done{};
}

CopySet copies(const std::string& folder, const std::string& backup, const std::string& store_uuid, Restored& told) {
  CopySet out;
  for (const std::string& name : copies_since(folder, backup)) {
    const std::string bytes = bytes_of(folder + "/" + name);
    const auto head = head_length(bytes, store_uuid);
    if (!head && head_length(bytes, "")) told.foreign.push_back(name);
    if (!head && !head_length(bytes, "") && !bytes.empty()) told.gaps.push_back(name + " can't be read");
    if (!head) continue;
    const std::size_t size = bytes.size() - *head;
    const FramesRead read = read_all_frames(std::string_view(bytes).substr(*head), out);
    if (read.skipped > 0)
      told.gaps.push_back(fmt::format("{} is damaged: {} bytes in it can't be read", name, read.skipped));
    if (read.end < size)
      told.gaps.push_back(fmt::format("{} was cut off: its last {} bytes are no whole record", name, size - read.end));
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

/// How many records of the damaged store's chains stand behind where the restored one's end; nullopt when it can't be
/// read that far.
std::optional<std::int64_t> lost_records(const std::string& damaged, const Heads& restored) {
  const auto old = Database::open(damaged, Database::Access::read, false, 0);
  if (!old) return std::nullopt;
  Database& db = *old.value();
  std::int64_t out = 0, stations = 0;
  Query q = db.query("SELECT id, uuid FROM station");
  for (; q.next(); ++stations) {
    const auto found = restored.find(q.text(1));
    const JournalHead at = found == restored.end() ? JournalHead{} : found->second;
    const JournalHead head = journal_head(db, q.integer(0));
    if (head.epoch == at.epoch) out += std::max<std::int64_t>(0, head.seq - at.seq);
    if (head.epoch > at.epoch)
      out += db.first("SELECT count(*) FROM journal WHERE station = ? AND (epoch, seq) > (?, ?)", q.integer(0),
                      at.epoch, at.seq)
                 .value_or(0);
  }
  return db.failed() || stations == 0 ? std::nullopt : std::optional(out);
}

/// Above the numbers of all epochs that are known of.
std::int64_t free_epoch(const std::string& damaged, const CopySet& copies) {
  std::int64_t out = 1;
  for (const auto& [uuid, chain] : copies.chains)
    if (!chain.empty()) out = std::max(out, chain.rbegin()->first.first.epoch);
  if (const auto old = Database::open(damaged, Database::Access::read, false, 0))
    for (const auto& [uuid, head] : heads_of(*old.value())) out = std::max(out, head.epoch);
  return out + 1;
}

constexpr const char* beside_a_store[] = {"", "-wal", "-shm", "-journal"};

/// Renames what there is of a store, all of it or nothing.
std::error_code rename_store(const std::string& from, const std::string& to) {
  std::error_code failed, none;
  std::vector<const char*> done;
  for (const char* beside : beside_a_store) {
    if (!fs::exists(from + beside, none)) continue;
    fs::rename(from + beside, to + beside, failed);
    if (failed) break;
    done.push_back(beside);
  }
  if (failed)
    for (const char* beside : done) fs::rename(to + beside, from + beside, none);
  return failed;
}

bool anything_at(const std::string& store) {
  std::error_code none;
  return std::any_of(std::begin(beside_a_store), std::end(beside_a_store),
                     [&](const char* beside) { return fs::exists(store + beside, none); });
}

std::string free_name(const std::string& store, std::int64_t now_us) {
  std::string at = utc_text(now_us);
  std::erase(at, ':');
  const std::string first = store + ".damaged-" + at;
  std::string out = first;
  for (int i = 2; anything_at(out); ++i) out = fmt::format("{}.{}", first, i);
  return out;
}

/// Sets aside what stands at `store`, also a log that was left alone there and would be taken for the new store's.
Result<Done> put_in_place(const std::string& made, const std::string& store, std::int64_t now_us, Restored& out) {
  std::error_code failed;
  const bool stood = fs::exists(store, failed);
  const std::string aside = free_name(store, now_us);
  if (const auto error = rename_store(store, aside))
    return error_at(store, "the damaged store can't be set aside: " + error.message(),
                    "give yourself the right to write its folder");
  if (const auto error = rename_store(made, store)) {
    rename_store(aside, store);
    return error_at(store, "the restored store can't be renamed: " + error.message(), "it lies in " + made);
  }
  if (stood) out.set_aside = aside;
  settle_file(fs::absolute(store, failed).parent_path().string());
  return Done{};
}

/// The last record of each chain is the new epoch's first.
Result<Done> begin_epochs(Database& db, UuidMaker& uuids, std::int64_t epoch, const std::string& reason,
                          const std::string& who, std::int64_t now_us) {
  Transaction transaction(db, Transaction::Kind::write);
  std::vector<std::int64_t> stations;
  {
    Query q = db.query("SELECT id FROM station ORDER BY id");
    while (q.next()) stations.push_back(q.integer(0));
  }
  for (std::int64_t station : stations) begin_epoch(db, uuids, station, reason, who, now_us, epoch);
  return transaction.commit();
}

/// Everything but the names of files: copies, new epochs, and an audit of what came of it.
Result<Done> rebuild(const std::string& path, const CopySet& copies, std::int64_t epoch, const std::string& who,
                     std::int64_t now_us, Restored& out, Heads& heads) {
  const auto opened_store = Database::open(path, Database::Access::write, false, 0);
  if (!opened_store) return opened_store.error();
  Database& db = *opened_store.value();
  if (const auto layout = settle_schema(db, false, ""); !layout) return layout.error();
  db.script("PRAGMA synchronous = OFF; PRAGMA journal_mode = MEMORY");  // the file has no name yet, and is synced once
  UuidMaker uuids;
  const auto replayed = replay(db, uuids, copies);
  if (!replayed) return replayed.error();
  out.added = replayed.value().added;
  out.gaps.insert(out.gaps.end(), replayed.value().gaps.begin(), replayed.value().gaps.end());
  heads = heads_of(db);
  const auto begun = begin_epochs(db, uuids, epoch, "restored from backup " + out.backup, who, now_us);
  if (!begun) return begun.error();
  const auto report = audit(db);
  if (!report) return report.error();
  if (!report.value().whole())
    return error_at(path, "the restored store is not whole: " + sentence(report.value().differences.front()),
                    "nothing was replaced; keep the backups as they are");
  out.heads = report.value().heads;
  db.script("PRAGMA journal_mode = WAL");
  return db.result(Done{});
}

Result<Done> rebuild_on_disk(const std::string& path, const CopySet& copies, std::int64_t epoch, const std::string& who,
                             std::int64_t now_us, Restored& out, Heads& heads) {
  auto built = rebuild(path, copies, epoch, who, now_us, out, heads);
  if (built && !settle_file(path)) built = error_at(path, std::strerror(errno), "check the disk");
  if (!built) remove_store(path);
  return built;
}

}  // namespace

Result<Restored> restore(const std::string& store, const std::string& folder, const std::string& who,
                         std::int64_t now_us) {
  const auto lock = StationLock::take_all(store);
  if (!lock) return lock.error();
  if (const auto readable = check_layout(folder); !readable) return readable.error();
  Restored out;
  out.backup = newest_whole(folder, out.passed_over);
  if (out.backup.empty())
    return error_at(folder, out.passed_over.empty() ? "there is no backup here" : "no backup here is whole",
                    "name the backups' folder with --from; nothing was changed");
  const std::string uuid = store_uuid(folder + "/" + out.backup), stands = store_uuid(store);
  if (!stands.empty() && stands != uuid)
    return error_at(folder, "the backups here are of another store than " + store,
                    "name its own backups' folder with --from; nothing was changed");
  const std::string path = store + ".restoring";
  if (const auto taken = take_backup(folder + "/" + out.backup, path); !taken) return taken.error();
  const CopySet all = copies(folder, out.backup, uuid, out);
  Heads heads;
  const auto built = rebuild_on_disk(path, all, free_epoch(store, all), who, now_us, out, heads);
  if (!built) return built.error();
  if (anything_at(store)) out.lost = lost_records(store, heads);
  if (const auto placed = put_in_place(path, store, now_us, out); !placed) return placed.error();
  return out;
}

}  // namespace jigwright
