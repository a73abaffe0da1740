#include "db/act.hpp"

#include "db/bodies.hpp"
#include "db/counts.hpp"
#include "db/digest.hpp"
#include "db/journal.hpp"
#include "db/people.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

using Id = std::int64_t;

std::optional<std::string> unless_empty(const std::string& text) {
  return text.empty() ? std::nullopt : std::optional(text);
}

std::optional<Blob> blob(const std::optional<Uuid>& uuid) {
  return uuid ? std::optional(Blob{bytes(*uuid)}) : std::nullopt;
}

Id board(Database& database, const std::string& serial) {
  if (const auto id = database.first("SELECT id FROM board WHERE serial = ?", serial)) return *id;
  database.run("INSERT INTO board(serial) VALUES(?)", serial);
  return database.last_id();
}

/// Columns: id, uuid, kind, at_us, station, who, second, reason, about, ends, trial.
std::vector<ActRecord> read(Database& database, Query q) {
  std::vector<ActRecord> out;
  while (q.next()) {
    ActRecord act;
    const Id id = q.integer(0);
    act.uuid = uuid_from_bytes(q.text(1)).value_or(Uuid{});
    act.kind = q.text(2);
    act.at_us = q.integer(3);
    act.station = q.text(4);
    act.who = q.text(5);
    act.second = q.text(6);
    act.reason = q.text(7);
    act.about = q.text(8);
    act.ends = uuid_from_bytes(q.text(9));
    act.trial = uuid_from_bytes(q.text(10));
    Query boards = database.query(
        "SELECT b.serial FROM act_board a JOIN board b ON b.id = a.board WHERE a.act = ? ORDER BY b.serial", id);
    while (boards.next()) act.boards.push_back(boards.text(0));
    Query values = database.query("SELECT key, value FROM act_value WHERE act = ?", id);
    while (values.next()) act.values[values.text(0)] = values.text(1);
    out.push_back(std::move(act));
  }
  return out;
}

}  // namespace

Uuid add_act(Database& database, UuidMaker& uuids, const ActRecord& act) {
  const Uuid uuid = uuids.next(act.at_us / 1000);
  const Id station = station_row(database, uuids, act.station, act.at_us);
  database.run(
      "INSERT INTO act(uuid, station, kind, at_us, who, second, reason, about, ends, trial) "
      "VALUES(?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
      Blob{bytes(uuid)}, station, act.kind, act.at_us, unless_empty(act.who), unless_empty(act.second),
      unless_empty(act.reason), unless_empty(act.about), blob(act.ends), blob(act.trial));
  const Id id = database.last_id();
  for (const std::string& serial : act.boards) {
    const Id on = board(database, serial);
    database.run(
        "INSERT OR IGNORE INTO act_board(act, board, attempts) VALUES(?, ?, (SELECT count(*) FROM trial WHERE "
        "board = ?))",
        id, on, on);
  }
  for (const auto& [key, value] : act.values)
    database.run("INSERT INTO act_value(act, key, value) VALUES(?, ?, ?)", id, key, value);
  if (const auto body = Bodies(database).act(bytes(uuid)); body && !database.failed())
    append_record(database, station, RecordKind::act, bytes(uuid), act.at_us, sha256(*body));
  settle_after(database, bytes(uuid));
  return uuid;
}

void settle_after(Database& database, std::string_view uuid) {
  const auto board = database.first(
      "SELECT t.board FROM act a JOIN trial t ON t.uuid = a.trial WHERE a.uuid = ? AND a.kind = 'review'", Blob{uuid});
  if (board) settle_counts(database, *board);
  settle_person(database, uuid);
}

Result<Uuid> write_act(Database& database, UuidMaker& uuids, const ActRecord& act) {
  Transaction transaction(database, Transaction::Kind::write);
  const Uuid uuid = add_act(database, uuids, act);
  if (const auto done = transaction.commit(); !done) return done.error();
  return uuid;
}

std::vector<ActRecord> acts_of(Database& database, const std::string& kind) {
  return read(database, database.query("SELECT a.id, a.uuid, a.kind, a.at_us, s.name, a.who, a.second, a.reason, "
                                       "a.about, a.ends, a.trial FROM act a "
                                       "JOIN station s ON s.id = a.station WHERE a.kind = ? ORDER BY a.id",
                                       kind));
}

std::vector<ActRecord> acts_on(Database& database, const std::string& serial) {
  return read(database, database.query(
                            "SELECT a.id, a.uuid, a.kind, a.at_us, s.name, a.who, a.second, a.reason, a.about, a.ends, "
                            "a.trial FROM act a JOIN station s ON s.id = a.station WHERE a.id IN (SELECT x.act FROM "
                            "board b JOIN act_board x "
                            "ON x.board = b.id WHERE b.serial = ?) ORDER BY a.id",
                            serial));
}

std::optional<ActRecord> last_act(Database& database, const std::string& kind, const std::string& about) {
  auto found = read(
      database,
      database.query(
          "SELECT a.id, a.uuid, a.kind, a.at_us, s.name, a.who, a.second, a.reason, a.about, "
          "a.ends, a.trial FROM act a JOIN station s ON s.id = a.station WHERE a.kind = ? AND (? = '' OR a.about = ?) "
          "ORDER BY a.id DESC LIMIT 1",
          kind, about, about));
  if (found.empty()) return std::nullopt;
  return std::move(found.front());
}

}  // namespace jigwright
