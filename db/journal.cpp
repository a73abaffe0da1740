#include "db/journal.hpp"

#include <algorithm>

#include "db/digest.hpp"
#include "db/questions.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

struct Dated {
  std::int64_t rises_us{};  ///< highest stamp of the chain so far: a clock that stepped back keeps its chain's order
  LogLine line;
};

std::string what_of(const Query& q) {
  const auto kind = static_cast<RecordKind>(q.integer(4));
  if (kind == RecordKind::trial_begun) return "trial begun";
  if (kind == RecordKind::trial_ended) return "trial ended: " + std::string(word(static_cast<Judgement>(q.integer(7))));
  return q.text(8) + " entered";
}

/// Columns: station, epoch, seq, at_us, kind, who, on, judgement, list's kind; newest first.
std::vector<Dated> lines_of(Query q) {
  std::vector<Dated> out;
  while (q.next())
    out.push_back({0, {q.text(0), q.integer(1), q.integer(2), q.integer(3), q.text(5), what_of(q), q.text(6)}});
  std::reverse(out.begin(), out.end());
  std::int64_t highest = 0;
  for (Dated& d : out) d.rises_us = highest = std::max(highest, d.line.at_us);
  return out;
}

std::vector<Dated> lines_of_station(Database& database, std::int64_t station, std::int64_t last) {
  return lines_of(database.query(
      "SELECT s.name, j.epoch, j.seq, j.at_us, j.kind, coalesce(p.name, e.who), coalesce(b.serial, e.name), "
      "t.judgement, e.kind FROM journal j JOIN station s ON s.id = j.station LEFT JOIN trial t ON t.uuid = j.uuid "
      "LEFT JOIN board b ON b.id = t.board LEFT JOIN person p ON p.id = t.operator "
      "LEFT JOIN entered e ON e.uuid = j.uuid WHERE j.station = ? ORDER BY j.epoch DESC, j.seq DESC LIMIT ?",
      station, last));
}

std::vector<Dated> lines_of_serial(Database& database, std::int64_t station, const std::string& serial,
                                   std::int64_t last) {
  return lines_of(database.query(
      "SELECT s.name, j.epoch, j.seq, j.at_us, j.kind, coalesce(p.name, e.who), coalesce(b.serial, e.name), "
      "t.judgement, e.kind FROM journal j JOIN station s ON s.id = j.station LEFT JOIN trial t ON t.uuid = j.uuid "
      "LEFT JOIN board b ON b.id = t.board LEFT JOIN person p ON p.id = t.operator "
      "LEFT JOIN entered e ON e.uuid = j.uuid WHERE j.station = ? AND j.uuid IN "
      "(SELECT n.uuid FROM board a JOIN trial n ON n.board = a.id WHERE a.serial = ? UNION ALL "
      "SELECT l.uuid FROM board a JOIN build d ON d.board = a.id JOIN entered l ON l.id = d.entered "
      "WHERE a.serial = ?) ORDER BY j.epoch DESC, j.seq DESC LIMIT ?",
      station, serial, serial, last));
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

std::string chain_start() {
  return std::string(32, '\0');
}

std::string record_hash(std::string_view before, std::string_view station_uuid, const JournalRow& row) {
  Canonical record;
  record.add(before).add(station_uuid).add(row.epoch).add(row.seq).add(row.kind).add(row.uuid).add(row.at_us);
  return sha256(record.add(row.body_sha256).bytes());
}

void append_record(Database& database, std::int64_t station, RecordKind kind, std::string_view uuid, std::int64_t at_us,
                   std::string_view body_sha256) {
  JournalRow row{1, 1, static_cast<int>(kind), std::string(uuid), at_us, std::string(body_sha256)};
  std::string before = chain_start(), station_uuid;
  {
    Query head = database.query(
        "SELECT epoch, seq, hash FROM journal WHERE station = ? ORDER BY epoch DESC, seq DESC LIMIT 1", station);
    if (head.next()) {
      row.epoch = head.integer(0);
      row.seq = head.integer(1) + 1;
      before = head.text(2);
    }
    Query at = database.query("SELECT uuid FROM station WHERE id = ?", station);
    if (at.next()) station_uuid = at.text(0);
  }
  database.run("INSERT INTO journal VALUES(?, ?, ?, ?, ?, ?, ?, ?)", station, row.epoch, row.seq, row.kind, Blob{uuid},
               at_us, Blob{body_sha256}, Blob{record_hash(before, station_uuid, row)});
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
