#include "db/journal.hpp"

#include <algorithm>
#include <map>

#include "db/bodies.hpp"
#include "db/canonical.hpp"
#include "db/digest.hpp"
#include "db/questions.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

struct Dated {
  std::int64_t rises_us{};  ///< highest stamp of the chain so far: a clock that stepped back keeps its chain's order
  LogLine line;
};

/// Columns from `at`: kind, judgement, list's kind, epoch's reason, archived trials, act's kind and reason.
std::string what_of(const Query& q, int at) {
  switch (static_cast<RecordKind>(q.integer(at))) {
    case RecordKind::trial:
      return "trial: " + std::string(word(static_cast<Judgement>(q.integer(at + 1))));
    case RecordKind::list_entered:
      return q.text(at + 2) + " entered";
    case RecordKind::epoch_begun:
      return "epoch begun: " + q.text(at + 3);
    case RecordKind::readings_archived:
      return "raw readings of " + q.text(at + 4) + " trials archived";
    case RecordKind::act:
      return q.text(at + 5) + (q.null(at + 6) ? "" : ": " + q.text(at + 6));
  }
  return record_word(q.integer(at));
}

/// Columns: station, epoch, seq, at_us, who, on, then what_of's; newest first.
std::vector<Dated> lines_of(Query q) {
  std::vector<Dated> out;
  while (q.next())
    out.push_back({0, {q.text(0), q.integer(1), q.integer(2), q.integer(3), q.text(4), what_of(q, 6), q.text(5)}});
  std::reverse(out.begin(), out.end());
  std::int64_t highest = 0;
  for (Dated& d : out) d.rises_us = highest = std::max(highest, d.line.at_us);
  return out;
}

std::vector<Dated> lines_of_station(Database& database, std::int64_t station, std::int64_t last) {
  return lines_of(database.query(
      "SELECT s.name, j.epoch, j.seq, j.at_us, coalesce(p.name, e.who, n.who, a.who, x.who), coalesce(b.serial, "
      "e.name, a.name, x.about, (SELECT min(y.serial) FROM act_board w JOIN board y ON y.id = w.board WHERE "
      "w.act = x.id)), j.kind, t.judgement, e.kind, n.reason, a.trials, x.kind, x.reason FROM journal j JOIN station s "
      "ON s.id = j.station "
      "LEFT JOIN trial t ON t.uuid = j.uuid LEFT JOIN board b ON b.id = t.board LEFT JOIN person p ON "
      "p.id = t.operator LEFT JOIN entered e ON e.uuid = j.uuid LEFT JOIN epoch_begun n ON n.uuid = j.uuid "
      "LEFT JOIN archived a ON a.uuid = j.uuid LEFT JOIN act x ON x.uuid = j.uuid WHERE j.station = ? ORDER BY j.epoch "
      "DESC, j.seq DESC LIMIT ?",
      station, last));
}

std::vector<Dated> lines_of_serial(Database& database, std::int64_t station, const std::string& serial,
                                   std::int64_t last) {
  return lines_of(database.query(
      "SELECT s.name, j.epoch, j.seq, j.at_us, coalesce(p.name, e.who, n.who, a.who, x.who), coalesce(b.serial, "
      "e.name, a.name, x.about, (SELECT min(y.serial) FROM act_board w JOIN board y ON y.id = w.board WHERE "
      "w.act = x.id)), j.kind, t.judgement, e.kind, n.reason, a.trials, x.kind, x.reason FROM journal j JOIN station s "
      "ON s.id = j.station "
      "LEFT JOIN trial t ON t.uuid = j.uuid LEFT JOIN board b ON b.id = t.board LEFT JOIN person p ON "
      "p.id = t.operator LEFT JOIN entered e ON e.uuid = j.uuid LEFT JOIN epoch_begun n ON n.uuid = j.uuid "
      "LEFT JOIN archived a ON a.uuid = j.uuid LEFT JOIN act x ON x.uuid = j.uuid WHERE j.station = ? AND j.uuid IN "
      "(SELECT k.uuid FROM board c JOIN trial k ON k.board = c.id WHERE c.serial = ? UNION ALL "
      "SELECT l.uuid FROM board c JOIN build d ON d.board = c.id JOIN entered l ON l.id = d.entered "
      "WHERE c.serial = ? UNION ALL SELECT m.uuid FROM board c JOIN act_board l ON l.board = c.id JOIN act m ON "
      "m.id = l.act WHERE c.serial = ?) ORDER BY j.epoch DESC, j.seq DESC LIMIT ?",
      station, serial, serial, serial, last));
}

std::vector<LogLine> merged(std::vector<Dated> lines, std::int64_t last) {
  std::stable_sort(lines.begin(), lines.end(), [](const Dated& a, const Dated& b) { return a.rises_us < b.rises_us; });
  const auto keep = std::min(lines.size(), static_cast<std::size_t>(last));
  std::vector<LogLine> out;
  for (auto at = lines.end() - static_cast<std::ptrdiff_t>(keep); at != lines.end(); ++at)
    out.push_back(std::move(at->line));
  return out;
}

}  // namespace

std::string record_word(std::int64_t kind) {
  switch (static_cast<RecordKind>(kind)) {
    case RecordKind::list_entered:
      return "list entered";
    case RecordKind::trial:
      return "trial";
    case RecordKind::epoch_begun:
      return "epoch begun";
    case RecordKind::readings_archived:
      return "raw readings archived";
    case RecordKind::act:
      return "act";
  }
  return "record of an unknown kind";
}

std::string chain_start() {
  return std::string(32, '\0');
}

std::string record_hash(std::string_view before, std::string_view station_uuid, const JournalRow& row) {
  Canonical record;
  record.add(before).add(station_uuid).add(row.epoch).add(row.seq).add(row.kind).add(row.uuid).add(row.at_us);
  return sha256(record.add(row.body_sha256).bytes());
}

namespace {

void add(Database& database, std::int64_t station, const std::string& before, const JournalRow& row) {
  std::string uuid;
  {
    Query at = database.query("SELECT uuid FROM station WHERE id = ?", station);
    if (at.next()) uuid = at.text(0);
  }
  database.run("INSERT INTO journal VALUES(?, ?, ?, ?, ?, ?, ?, ?)", station, row.epoch, row.seq, row.kind,
               Blob{row.uuid}, row.at_us, Blob{row.body_sha256}, Blob{record_hash(before, uuid, row)});
}

}  // namespace

JournalHead journal_head(Database& database, std::int64_t station) {
  JournalHead out{1, 0, chain_start()};
  Query q = database.query(
      "SELECT epoch, seq, hash FROM journal WHERE station = ? ORDER BY epoch DESC, seq DESC LIMIT 1", station);
  if (q.next()) out = {q.integer(0), q.integer(1), q.text(2)};
  return out;
}

void append_record(Database& database, std::int64_t station, RecordKind kind, std::string_view uuid, std::int64_t at_us,
                   std::string_view body_sha256) {
  const JournalHead head = journal_head(database, station);
  add(database, station, head.hash,
      {head.epoch, head.seq + 1, static_cast<int>(kind), std::string(uuid), at_us, std::string(body_sha256)});
}

void append_lists(Database& database, std::int64_t station, std::int64_t first, std::int64_t last, std::int64_t at_us) {
  std::map<std::int64_t, Sha256> bodies;
  Bodies(database).entered(first, last, [&](std::int64_t id, std::string_view bytes) { bodies[id].add(bytes); });
  for (auto& [id, body] : bodies) {
    std::string uuid;
    if (Query q = database.query("SELECT uuid FROM entered WHERE id = ?", id); q.next()) uuid = q.text(0);
    append_record(database, station, RecordKind::list_entered, uuid, at_us, body.digest());
  }
}

void append_epoch(Database& database, std::int64_t station, std::int64_t epoch, std::string_view uuid,
                  std::int64_t at_us) {
  const auto body = Bodies(database).epoch_begun(uuid);
  if (!body || database.failed()) return;
  add(database, station, chain_start(),
      {epoch, 1, static_cast<int>(RecordKind::epoch_begun), std::string(uuid), at_us, sha256(*body)});
}

void begin_epoch(Database& database, UuidMaker& uuids, std::int64_t station, const std::string& reason,
                 const std::string& who, std::int64_t at_us, std::int64_t least) {
  const JournalHead head = journal_head(database, station);
  if (head.seq == 0) return;
  const Uuid uuid = uuids.next(at_us / 1000);
  database.run("INSERT INTO epoch_begun(uuid, reason, who, last_epoch, last_seq, last_hash) VALUES(?, ?, ?, ?, ?, ?)",
               Blob{bytes(uuid)}, reason, who.empty() ? std::nullopt : std::optional(who), head.epoch, head.seq,
               Blob{head.hash});
  append_epoch(database, station, std::max(head.epoch + 1, least), bytes(uuid), at_us);
}

std::int64_t station_row(Database& database, UuidMaker& uuids, const std::string& name, std::int64_t at_us) {
  if (const auto id = database.first("SELECT id FROM station WHERE name = ?", name)) return *id;
  const Uuid uuid = uuids.next(at_us / 1000);
  database.run("INSERT INTO station(uuid, name) VALUES(?, ?)", Blob{bytes(uuid)}, name);
  return database.last_id();
}

Result<std::vector<LogLine>> read_log(Database& database, const std::string& serial, std::int64_t last) {
  if (!serial.empty())
    if (const auto known = trace_serial(database, serial); !known) return known.error();
  Transaction reading(database, Transaction::Kind::read);
  std::vector<std::int64_t> stations;
  {
    Query q = database.query("SELECT id FROM station ORDER BY id");
    while (q.next()) stations.push_back(q.integer(0));
  }
  std::vector<Dated> lines;
  for (std::int64_t station : stations)
    for (Dated& d :
         serial.empty() ? lines_of_station(database, station, last) : lines_of_serial(database, station, serial, last))
      lines.push_back(std::move(d));
  return database.result(merged(std::move(lines), last));
}

}  // namespace jigwright
