#include "db/migrate.hpp"

#include <fmt/format.h>
#include <sqlite3.h>
#include <sys/stat.h>

#include <limits>
#include <vector>

#include "db/bodies.hpp"
#include "db/journal.hpp"
#include "db/schema.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

using Id = std::int64_t;

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

/// Sets that many trials share are found by the hash of their content; before layout 3 integer keys were in it.
void hash_by_content(Database& database) {
  Bodies bodies(database);
  const auto rehash = [&](Sql ids, Sql update, const Part& (Bodies::*part)(Id)) {
    std::vector<Id> all;
    {
      Query q = database.query(ids);
      while (q.next()) all.push_back(q.integer(0));
    }
    for (Id id : all) database.run(update, Blob{(bodies.*part)(id).sha256}, id);
  };
  rehash("SELECT id FROM setup", "UPDATE setup SET sha256 = ? WHERE id = ?", &Bodies::setup);
  rehash("SELECT id FROM applied", "UPDATE applied SET sha256 = ? WHERE id = ?", &Bodies::applied);
  rehash("SELECT id FROM equipment", "UPDATE equipment SET sha256 = ? WHERE id = ?", &Bodies::equipment);
  rehash("SELECT id FROM reduction", "UPDATE reduction SET sha256 = ? WHERE id = ?", &Bodies::reduction);
}

void record_trial(Database& database, Bodies& bodies, Id station, const std::string& uuid, std::int64_t at_us) {
  if (const auto body = bodies.trial(uuid); body && !database.failed())
    append_record(database, station, RecordKind::trial, uuid, at_us, body->sha256);
}

struct OldRecord {
  Id station{};
  std::int64_t kind{};
  std::string uuid;
  std::int64_t at_us{};
  std::string body_sha256;
};

/// Each chain goes on in a new epoch, which names the old one's end, with one record a trial; the old epoch's records
/// stay in the copy.
void carry_chains_of_layout_2(Database& database, UuidMaker& uuids, std::int64_t now_us) {
  std::vector<OldRecord> old;
  std::vector<Id> stations;
  {
    Query q =
        database.query("SELECT station, kind, uuid, at_us, body_sha256 FROM journal ORDER BY station, epoch, seq");
    while (q.next()) {
      old.push_back({q.integer(0), q.integer(1), q.text(2), q.integer(3), q.text(4)});
      if (stations.empty() || stations.back() != old.back().station) stations.push_back(old.back().station);
    }
  }
  for (Id station : stations)
    begin_epoch(database, uuids, station, fmt::format("layout 2 brought to layout {}", layout_version), "", now_us);
  database.run("DELETE FROM journal WHERE kind <> ?", static_cast<int>(RecordKind::epoch_begun));
  Bodies bodies(database);
  for (const OldRecord& r : old) {
    const bool list = r.kind == static_cast<int>(RecordKind::list_entered);
    const bool begun_only =
        r.kind == 1 && database.first("SELECT 1 FROM trial WHERE uuid = ? AND state = 2", Blob{r.uuid}).has_value();
    if (list) append_record(database, r.station, RecordKind::list_entered, r.uuid, r.at_us, r.body_sha256);
    if (r.kind == 2 || begun_only) record_trial(database, bodies, r.station, r.uuid, r.at_us);
  }
}

void begin_chains_of_layout_1(Database& database, UuidMaker& uuids, std::int64_t now_us) {
  Bodies bodies(database);
  {
    Query q = database.query("SELECT uuid, station, at_us, coalesce(took_ms, 0) FROM trial ORDER BY id");
    while (q.next()) record_trial(database, bodies, q.integer(1), q.text(0), q.integer(2) + q.integer(3) * 1000);
  }
  const auto first = database.first("SELECT id FROM station ORDER BY id LIMIT 1");
  const Id station = first ? *first : station_row(database, uuids, "station", now_us);
  append_lists(database, station, 0, std::numeric_limits<Id>::max(), now_us);
}

/// Layout 1 did not say which list brought a row: all are one.
void enter_lists_of_layout_1(Database& database, UuidMaker& uuids, std::int64_t now_us) {
  const auto held = database.first(
      "SELECT 1 FROM build UNION ALL SELECT 1 FROM reel UNION ALL SELECT 1 FROM feed UNION ALL "
      "SELECT 1 FROM product_order WHERE product IS NOT NULL LIMIT 1");
  if (!held) return;
  const Uuid uuid = uuids.next(now_us / 1000);
  database.run("INSERT INTO entered(uuid, kind, name) VALUES(?, 'lists', 'all lists of layout 1')", Blob{bytes(uuid)});
  const Id id = database.last_id();
  database.run("UPDATE product_order SET entered = ? WHERE product IS NOT NULL", id);
  database.run("UPDATE build SET entered = ?", id);
  database.run("UPDATE reel SET entered = ?", id);
  database.run("UPDATE feed SET entered = ?", id);
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
  lay_out_after(database, *layout);
  hash_by_content(database);
  database.run("UPDATE trial SET state = 2 WHERE state = 0");
  if (*layout == 1) enter_lists_of_layout_1(database, uuids, now_us);
  *layout == 1 ? begin_chains_of_layout_1(database, uuids, now_us) : carry_chains_of_layout_2(database, uuids, now_us);
  const auto done = transaction.commit();
  if (!done) return done.error();
  return fmt::format("{} was brought from layout {} to layout {}; as it was, it lies in {}", database.path(), *layout,
                     layout_version, to);
}

}  // namespace jigwright
