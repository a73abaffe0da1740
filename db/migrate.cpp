#include "db/migrate.hpp"

#include <fmt/format.h>
#include <sqlite3.h>
#include <sys/stat.h>

#include <vector>

#include "db/bodies.hpp"
#include "db/journal.hpp"
#include "db/schema.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

struct Closing {
  void operator()(sqlite3* handle) const { sqlite3_close_v2(handle); }
};
using Handle = std::unique_ptr<sqlite3, Closing>;

Handle opened(const std::string& path, int flags) {
  sqlite3* handle = nullptr;
  sqlite3_open_v2(path.c_str(), &handle, flags, nullptr);
  return Handle(handle);
}

/// "results.db.layout-1", or the first of "results.db.layout-1.2", ... that is free.
std::string free_path(const std::string& path, std::int64_t layout) {
  const std::string first = fmt::format("{}.layout-{}", path, layout);
  struct stat status {};
  std::string out = first;
  for (int i = 2; ::stat(out.c_str(), &status) == 0; ++i) out = fmt::format("{}.{}", first, i);
  return out;
}

Error no_copy(Database& database, const std::string& to, const std::string& reason) {
  return {Error::Kind::store, fmt::format("the copy \"{}\", due before the layout is changed, failed: {}", to, reason),
          database.path(), "make room beside the store; nothing was changed"};
}

bool sound(sqlite3* copy) {
  sqlite3_stmt* check = nullptr;
  if (sqlite3_prepare_v2(copy, "PRAGMA quick_check(1)", -1, &check, nullptr) != SQLITE_OK) return false;
  const bool ok = sqlite3_step(check) == SQLITE_ROW &&
                  std::string_view(reinterpret_cast<const char*>(sqlite3_column_text(check, 0))) == "ok";
  sqlite3_finalize(check);
  return ok;
}

/// The file as last committed: the caller's transaction keeps other writers out meanwhile.
Result<Done> copy(Database& database, const std::string& to) {
  const Handle from = opened(database.path(), SQLITE_OPEN_READONLY);
  const Handle into = opened(to, SQLITE_OPEN_READWRITE | SQLITE_OPEN_CREATE);
  sqlite3_backup* backup = sqlite3_backup_init(into.get(), "main", from.get(), "main");
  if (backup == nullptr) return no_copy(database, to, sqlite3_errmsg(into.get()));
  const int code = sqlite3_backup_step(backup, -1);
  sqlite3_backup_finish(backup);
  if (code != SQLITE_DONE) return no_copy(database, to, sqlite3_errstr(code));
  if (!sound(into.get())) return no_copy(database, to, "it does not read back");
  return Done{};
}

void journal_trials(Database& database) {
  Bodies bodies(database);
  Query q = database.query("SELECT uuid, station, at_us, state, took_ms FROM trial ORDER BY id");
  while (q.next()) {
    const std::string uuid = q.text(0);
    const auto begun = bodies.begun(uuid);
    append_record(database, q.integer(1), RecordKind::trial_begun, uuid, q.integer(2), begun ? begun->sha256 : "");
    if (q.integer(3) == 0) continue;
    const auto ended = bodies.ended(uuid);
    append_record(database, q.integer(1), RecordKind::trial_ended, uuid, q.integer(2) + q.integer(4) * 1000,
                  ended ? ended->sha256 : "");
  }
}

void journal_lists(Database& database, UuidMaker& uuids, std::int64_t now_us) {
  const auto held = database.first(
      "SELECT 1 FROM build UNION ALL SELECT 1 FROM reel UNION ALL SELECT 1 FROM feed UNION ALL "
      "SELECT 1 FROM product_order WHERE product IS NOT NULL LIMIT 1");
  if (!held) return;
  const Uuid uuid = uuids.next(now_us / 1000);
  database.run("INSERT INTO entered(uuid, kind, name) VALUES(?, 'lists', 'all lists of layout 1')", Blob{bytes(uuid)});
  const std::int64_t id = database.last_id();
  database.run("UPDATE product_order SET entered = ? WHERE product IS NOT NULL", id);
  database.run("UPDATE build SET entered = ?", id);
  database.run("UPDATE reel SET entered = ?", id);
  database.run("UPDATE feed SET entered = ?", id);
  const auto first = database.first("SELECT id FROM station ORDER BY id LIMIT 1");
  const std::int64_t station = first ? *first : station_row(database, uuids, "station", now_us);
  const auto bodies = Bodies(database).entered(id);
  if (const auto body = bodies.find(id); body != bodies.end())
    append_record(database, station, RecordKind::list_entered, bytes(uuid), now_us, body->second.sha256);
}

}  // namespace

Result<std::string> migrate(Database& database, UuidMaker& uuids, std::int64_t now_us) {
  Transaction transaction(database, Transaction::Kind::write);
  const auto layout = database.first("PRAGMA user_version");
  if (database.failed()) return database.error();
  if (*layout == layout_version) return std::string();
  const std::string to = free_path(database.path(), *layout);
  const auto copied = copy(database, to);
  if (!copied) return copied.error();
  lay_out_2(database);
  journal_trials(database);
  journal_lists(database, uuids, now_us);
  const auto done = transaction.commit();
  if (!done) return done.error();
  return fmt::format("{} was brought from layout {} to layout {}; as it was, it lies in {}", database.path(), *layout,
                     layout_version, to);
}

}  // namespace jigwright
