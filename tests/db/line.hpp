// What the tests of backups and restoring share: two stations trying boards in one store, a picture of everything that
// a store holds without its integer keys, and damage to files.
#pragma once
#include <fstream>
#include <iterator>
#include <map>
#include <random>

#include "db/audit.hpp"
#include "db/copying.hpp"
#include "db/journal.hpp"
#include "db/sqlite.hpp"
#include "tests/db/factory.hpp"
#include "tests/db/room.hpp"

namespace jigwright::room {

inline std::string bytes_of(const std::string& path) {
  std::ifstream in(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), {}};
}

inline void write_bytes(const std::string& path, const std::string& bytes) {
  std::ofstream out(path, std::ios::binary | std::ios::trunc);
  out << bytes;
  REQUIRE(out.good());
}

inline void flip(const std::string& path, std::size_t at) {
  std::string bytes = bytes_of(path);
  REQUIRE(at < bytes.size());
  bytes[at] = static_cast<char>(bytes[at] ^ 0x10);
  write_bytes(path, bytes);
}

/// Overwrites the middle of a store, so that it is no store any more but for its first page.
inline void ruin(const std::string& path) {
  std::string bytes = bytes_of(path);
  for (std::size_t at = bytes.size() / 4; at < bytes.size() * 3 / 4; ++at) bytes[at] = 'x';
  write_bytes(path, bytes);
}

/// A row a line, columns by type and value; for statements that the test knows by heart.
inline std::string picture(Database& db, Sql sql, int columns) {
  std::string out;
  Query q = db.query(sql);
  while (q.next()) {
    for (int i = 0; i < columns; ++i) {
      const auto type = q.type(i);
      out += std::to_string(static_cast<int>(type)) + ':';
      if (type == Query::Type::integer) out += std::to_string(q.integer(i));
      if (type == Query::Type::real) out.append(std::to_string(q.real(i)) + '/' + std::to_string(q.real(i) * 1e9));
      if (type == Query::Type::text || type == Query::Type::blob) out += q.text(i);
      out += '|';
    }
    out += '\n';
  }
  if (db.failed()) FAIL(describe(db.error()));
  return out;
}

/// Every table by its content, in an order of its own; without integer keys, which a restored store gives anew.
inline std::map<std::string, std::string> content(Database& db) {
  std::map<std::string, std::string> out;
  out["boards"] = picture(db, "SELECT * FROM boards ORDER BY serial", 8);
  out["carries"] = picture(db, "SELECT serial, designator, reel, how FROM carries ORDER BY 1, 2, 3, 4", 4);
  out["results"] = picture(db,
                           "SELECT serial, at, attempt, judgement, step, metric, variant, unit, value, u, n, state, "
                           "verdict, low, high, spec_low, spec_high FROM results ORDER BY 1, 3, 5, 6, 7, 8",
                           17);
  out["trials"] = picture(db,
                          "SELECT t.uuid, b.serial, o.name, s.uuid, s.name, t.nest, t.at_us, t.took_ms, t.state, "
                          "t.judgement, t.void_reason, t.origin, t.attempt, t.counts, u.sha256, u.plan, u.program, "
                          "r.uuid, r.limit_set, r.number, d.sha256, a.sha256, e.sha256, n.sha256, p.name, t.depth, "
                          "t.ambient_degC, t.unsafe, t.nogo, m.step || m.name || m.variant, "
                          "w.step || w.name || w.variant, t.worst_margin, t.mark, t.purpose FROM trial t "
                          "JOIN board b ON b.id = t.board LEFT JOIN product_order o ON o.id = t.ord "
                          "JOIN station s ON s.id = t.station JOIN setup u ON u.id = t.setup "
                          "JOIN revision r ON r.id = t.revision LEFT JOIN document d ON d.id = r.document "
                          "LEFT JOIN applied a ON a.id = t.applied LEFT JOIN equipment e ON e.id = t.equipment "
                          "LEFT JOIN reduction n ON n.id = t.reduction LEFT JOIN person p ON p.id = t.operator "
                          "LEFT JOIN metric m ON m.id = t.deciding_metric LEFT JOIN metric w ON w.id = t.worst_metric "
                          "ORDER BY t.uuid",
                          34);
  out["findings"] = picture(db,
                            "SELECT t.uuid, m.step, m.name, m.variant, m.unit, m.about, x.value, x.u, x.n, x.state, "
                            "x.verdict FROM finding x JOIN trial t ON t.id = x.trial JOIN metric m ON m.id = x.metric "
                            "ORDER BY 1, 2, 3, 4, 5, 6",
                            11);
  out["readings"] = picture(db,
                            "SELECT t.uuid, r.format, r.body, r.sha256 FROM reading_blob r "
                            "JOIN trial t ON t.id = r.trial ORDER BY 1",
                            4);
  out["documents"] = picture(db, "SELECT sha256, kind, name, body FROM document ORDER BY 1", 4);
  out["limits"] = picture(db,
                          "SELECT a.sha256, m.step, m.name, m.variant, m.unit, m.about, l.spec_low, l.spec_high, "
                          "l.nominal, l.guard, l.share, l.u_budget, l.u_of_reading, l.width, l.low, l.high, l.reason "
                          "FROM applied_limit l JOIN applied a ON a.id = l.applied JOIN metric m ON m.id = l.metric "
                          "ORDER BY 1, 2, 3, 4, 5, 6",
                          17);
  out["instruments"] = picture(db,
                               "SELECT e.sha256, i.instrument, i.maker, i.model, i.serial, i.firmware "
                               "FROM equipment_instrument q JOIN equipment e ON e.id = q.equipment "
                               "JOIN instrument i ON i.id = q.instrument ORDER BY 1, 2, 3, 4, 5, 6",
                               6);
  out["versions"] = picture(db,
                            "SELECT r.sha256, s.kind, s.version FROM reduction_step s "
                            "JOIN reduction r ON r.id = s.reduction ORDER BY 1, 2",
                            3);
  out["orders"] = picture(db,
                          "SELECT o.name, o.product, e.uuid FROM product_order o LEFT JOIN entered e ON "
                          "e.id = o.entered ORDER BY 1",
                          3);
  out["places"] = picture(db,
                          "SELECT o.name, d.build_no, b.serial, d.panel, e.uuid FROM build d JOIN product_order o ON "
                          "o.id = d.ord JOIN board b ON b.id = d.board LEFT JOIN entered e ON e.id = d.entered "
                          "ORDER BY 1, 2",
                          5);
  out["reels"] = picture(db,
                         "SELECT r.name, l.maker, l.part, l.lot, r.date_code, r.distributor, r.rereeled, r.quantity, "
                         "r.marking, e.uuid FROM reel r JOIN lot l ON l.id = r.lot LEFT JOIN entered e ON "
                         "e.id = r.entered ORDER BY 1",
                         10);
  out["feeds"] = picture(db,
                         "SELECT f.uuid, o.name, f.designator, r.name, f.poss_from, f.cert_from, f.cert_to, f.poss_to, "
                         "f.repair, f.since_us, f.known_us, f.dropped_us, e.uuid FROM feed f JOIN product_order o ON "
                         "o.id = f.ord JOIN reel r ON r.id = f.reel LEFT JOIN entered e ON e.id = f.entered "
                         "ORDER BY 1",
                         13);
  out["lists"] = picture(db, "SELECT uuid, kind, name, who FROM entered ORDER BY 1", 4);
  out["archives"] = picture(db, "SELECT uuid, who, before_us, trials, bytes, name, sha256 FROM archived ORDER BY 1", 7);
  out["acts"] = picture(db,
                        "SELECT a.uuid, s.uuid, a.kind, a.at_us, a.who, a.second, a.reason, a.about, a.ends, a.trial, "
                        "(SELECT group_concat(b.serial) FROM act_board x JOIN board b ON b.id = x.board WHERE "
                        "x.act = a.id), (SELECT group_concat(v.key || '=' || v.value) FROM act_value v WHERE "
                        "v.act = a.id) FROM act a JOIN station s ON s.id = a.station ORDER BY 1",
                        12);
  out["meta"] = picture(db, "SELECT key, value FROM meta ORDER BY 1", 2);
  out["journal"] =
      picture(db,
              "SELECT s.uuid, j.epoch, j.seq, j.kind, j.uuid, j.at_us, j.body_sha256, j.hash FROM journal j "
              "JOIN station s ON s.id = j.station WHERE NOT EXISTS(SELECT 1 FROM epoch_begun n WHERE "
              "n.uuid = j.uuid AND n.reason LIKE 'restored%') ORDER BY 1, 2, 3",
              8);
  return out;
}

inline std::map<std::string, std::string> content(const std::string& path) {
  return content(*must(Database::open(path, Database::Access::read, false, 0)));
}

inline void check_same(const std::map<std::string, std::string>& a, const std::map<std::string, std::string>& b) {
  for (const auto& [name, rows] : a) {
    CAPTURE(name);
    const std::string& other = b.at(name);
    const auto [at, there] = std::mismatch(rows.begin(), rows.end(), other.begin(), other.end());
    if (rows == other) continue;
    const auto line = rows.rfind('\n', static_cast<std::size_t>(at - rows.begin()));
    FAIL_CHECK(rows.substr(line == std::string::npos ? 0 : line, 300), "\nis not\n",
               other.substr(line == std::string::npos ? 0 : line, 300));
  }
}

inline AuditReport audit_of(const std::string& path) {
  return must(audit(*must(Database::open(path, Database::Access::read, false, 0))));
}

inline void check_whole(const std::string& path) {
  for (const Difference& d : audit_of(path).differences) FAIL_CHECK(sentence(d));
}

/// A store with its folder of backups, and a line that tries boards there on two stations.
class Line {
 public:
  TempFolder folder;
  const std::string path{folder.file("s.db")};
  const std::string backups{folder.file("backups")};
  Factory factory{{7, 100'000, 200, 12, 60}};
  std::int64_t now_us{noon_us};

  BackupPlan plan() const { return {backups, 24 * 3600, 7}; }
  std::unique_ptr<Store> store() const { return open(path); }

  TrialStart start(std::int64_t board, int station = 1) {
    TrialStart out = factory.start(board);
    out.station = "bench " + std::to_string(station);
    out.at_us = now_us += 1'000'000;
    return out;
  }
  OpenTrial begin(Store& store, std::int64_t board, int station = 1) {
    return must(store.begin_trial(start(board, station)));
  }
  void finish(Store& store, const OpenTrial& open, std::int64_t board, Judgement judgement = Judgement::go) {
    TrialEnd end = factory.end(board);
    end.at_us = now_us += 1'000'000;
    end.outcome = {};
    end.outcome.judgement = judgement;
    if (judgement == Judgement::no_go) {
      end.outcome.deciding = 0;
      end.findings[0].judged.verdict = Verdict::missed;
    }
    if (judgement == Judgement::void_) end.outcome.void_reason = "the lid was opened";
    for (FindingRow& row : end.findings)
      if (judgement != Judgement::no_go && row.judged.verdict == Verdict::missed) row.judged.verdict = Verdict::met;
    end.findings[1].judged.finding.value = std::numeric_limits<double>::quiet_NaN();
    end.findings[1].judged.finding.state = FindingState::no_data;
    end.findings[1].judged.margin = std::numeric_limits<double>::quiet_NaN();
    must(store.finish_trial(open, end));
  }
  void try_one(Store& store, std::int64_t board, Judgement judgement = Judgement::go, int station = 1) {
    finish(store, begin(store, board, station), board, judgement);
  }
  void copy(Store& store) {
    RecordCopies copies(store.database(), backups);
    must(copies.catch_up());
  }
  std::string backup() {
    const BackupMade made = must(make_backup(path, plan(), now_us += 1'000'000));
    REQUIRE(!made.path.empty());
    return made.path;
  }
  Result<Restored> restore() { return jigwright::restore(path, backups, "A. Tester", now_us += 1'000'000); }
  Restored restored() { return must(restore()); }
};

}  // namespace jigwright::room
