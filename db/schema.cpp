#include "db/schema.hpp"

#include <fmt/format.h>

namespace jigwright {
namespace {

// Integer keys never leave the file; uuids, names and serials do. Records are only added. What changes in place is
// derived from them: trial.counts, column_block, and the columns of a trial that its end fills in.
constexpr const char* layout_1 = R"sql(
CREATE TABLE meta(key TEXT PRIMARY KEY, value ANY NOT NULL) STRICT, WITHOUT ROWID;

-- Full text of every file that ever judged. A set-up is what many trials have in common when they begin.
CREATE TABLE document(
  id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE CHECK(length(sha256) = 32), kind TEXT NOT NULL,
  name TEXT NOT NULL,  -- as first given
  body TEXT NOT NULL) STRICT;
CREATE TABLE setup(
  id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE, plan TEXT NOT NULL, program TEXT NOT NULL) STRICT;
CREATE TABLE setup_document(
  setup INTEGER NOT NULL REFERENCES setup, document INTEGER NOT NULL REFERENCES document,
  PRIMARY KEY(setup, document)) STRICT, WITHOUT ROWID;

CREATE TABLE station(id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, name TEXT NOT NULL UNIQUE) STRICT;
CREATE TABLE person(id INTEGER PRIMARY KEY, name TEXT NOT NULL UNIQUE) STRICT;
CREATE TABLE instrument(
  id INTEGER PRIMARY KEY, instrument TEXT NOT NULL, maker TEXT NOT NULL, model TEXT NOT NULL, serial TEXT NOT NULL,
  firmware TEXT NOT NULL, UNIQUE(instrument, maker, model, serial, firmware)) STRICT;
-- The instruments that answered in a trial, and the versions of the steps' arithmetic: sets that many trials share.
CREATE TABLE equipment(id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE) STRICT;
CREATE TABLE equipment_instrument(
  equipment INTEGER NOT NULL REFERENCES equipment, instrument INTEGER NOT NULL REFERENCES instrument,
  PRIMARY KEY(equipment, instrument)) STRICT, WITHOUT ROWID;
CREATE TABLE reduction(id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE) STRICT;
CREATE TABLE reduction_step(
  reduction INTEGER NOT NULL REFERENCES reduction, kind TEXT NOT NULL, version INTEGER NOT NULL,
  PRIMARY KEY(reduction, kind)) STRICT, WITHOUT ROWID;

-- Orders and boards. A build place is the assembler's order of placement; it may arrive after the trials.
CREATE TABLE product_order(id INTEGER PRIMARY KEY, name TEXT NOT NULL UNIQUE, product TEXT) STRICT;
CREATE TABLE board(id INTEGER PRIMARY KEY, serial TEXT NOT NULL UNIQUE) STRICT;
CREATE TABLE build(
  ord INTEGER NOT NULL REFERENCES product_order, build_no INTEGER NOT NULL, board INTEGER NOT NULL REFERENCES board,
  panel TEXT, PRIMARY KEY(ord, build_no)) STRICT, WITHOUT ROWID;
CREATE UNIQUE INDEX build_board ON build(board);

-- A changed unit is another metric. about: 0 the board, 1 the jig.
CREATE TABLE metric(
  id INTEGER PRIMARY KEY, step TEXT NOT NULL, name TEXT NOT NULL, variant TEXT NOT NULL, unit TEXT NOT NULL,
  about INTEGER NOT NULL, UNIQUE(step, name, variant, unit, about)) STRICT;
CREATE TABLE revision(
  id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, limit_set TEXT NOT NULL, number INTEGER NOT NULL,
  document INTEGER REFERENCES document) STRICT;
CREATE INDEX revision_number ON revision(limit_set, number);
-- The limits that judged a trial, kept once for all trials judged alike. guard: 0 uncertainty, 1 inset, 2 typed, 3 none.
CREATE TABLE applied(id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE) STRICT;
CREATE TABLE applied_limit(
  applied INTEGER NOT NULL REFERENCES applied, metric INTEGER NOT NULL REFERENCES metric,
  spec_low REAL, spec_high REAL, nominal REAL, guard INTEGER NOT NULL, share REAL, u_budget REAL,
  u_of_reading REAL, width REAL, low REAL, high REAL, reason TEXT,
  PRIMARY KEY(applied, metric)) STRICT, WITHOUT ROWID;

-- state: 0 open, 1 ended. judgement: 0 GO, 1 NO-GO, 2 VOID. origin: 0 measured, 1 simulated, 2 taken.
CREATE TABLE trial(
  id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, board INTEGER NOT NULL REFERENCES board,
  ord INTEGER REFERENCES product_order,        -- as named when the trial began
  station INTEGER NOT NULL REFERENCES station, nest INTEGER NOT NULL, at_us INTEGER NOT NULL, took_ms INTEGER,
  state INTEGER NOT NULL, judgement INTEGER NOT NULL, void_reason TEXT, origin INTEGER NOT NULL,
  attempt INTEGER NOT NULL, counts INTEGER NOT NULL,  -- counts: this trial speaks for its board
  setup INTEGER NOT NULL REFERENCES setup, revision INTEGER NOT NULL REFERENCES revision,
  applied INTEGER REFERENCES applied, equipment INTEGER REFERENCES equipment, reduction INTEGER REFERENCES reduction,
  operator INTEGER REFERENCES person, depth TEXT NOT NULL, ambient_degC REAL,
  unsafe TEXT,                                 -- what of the safe state is unconfirmed; NULL = confirmed
  nogo INTEGER NOT NULL DEFAULT 0,             -- limits missed
  deciding_metric INTEGER REFERENCES metric, worst_metric INTEGER REFERENCES metric, worst_margin REAL) STRICT;
CREATE INDEX trial_board ON trial(board, id);

-- finding.state: 0 measured, 1 over range, 2 not settled, 3 no data, 4 skipped.
-- verdict: 0 met, 1 missed, 2 unsure, 3 no evidence, 4 recorded, 5 invalid.
CREATE TABLE finding(
  trial INTEGER NOT NULL REFERENCES trial, metric INTEGER NOT NULL REFERENCES metric, value REAL, u REAL,
  n INTEGER NOT NULL, state INTEGER NOT NULL, verdict INTEGER NOT NULL,
  PRIMARY KEY(trial, metric)) STRICT, WITHOUT ROWID;
CREATE TABLE reading_blob(
  trial INTEGER PRIMARY KEY REFERENCES trial, format INTEGER NOT NULL, body BLOB NOT NULL) STRICT;

CREATE TABLE lot(
  id INTEGER PRIMARY KEY, maker TEXT NOT NULL, part TEXT NOT NULL, lot TEXT NOT NULL, UNIQUE(maker, part, lot)) STRICT;
CREATE TABLE reel(
  id INTEGER PRIMARY KEY, name TEXT NOT NULL UNIQUE, lot INTEGER NOT NULL REFERENCES lot,
  date_code TEXT,                              -- ISO 8601 week, "2024-W31"
  distributor TEXT, rereeled INTEGER, quantity INTEGER, marking TEXT) STRICT;
CREATE INDEX reel_lot ON reel(lot);
-- A reel serving a designator over build places, ends inclusive: surely from cert_from to cert_to, possibly from
-- poss_from to poss_to; cert_from > cert_to = nowhere surely. A repair is a feed of one board that outranks the others.
CREATE TABLE feed(
  id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, ord INTEGER NOT NULL REFERENCES product_order,
  designator TEXT NOT NULL, reel INTEGER NOT NULL REFERENCES reel,
  poss_from INTEGER NOT NULL, cert_from INTEGER NOT NULL, cert_to INTEGER NOT NULL, poss_to INTEGER NOT NULL,
  repair INTEGER NOT NULL DEFAULT 0, since_us INTEGER,  -- true of the boards from
  known_us INTEGER NOT NULL, dropped_us INTEGER,        -- true of the records from, to
  CHECK(poss_from <= poss_to AND poss_from <= cert_from AND cert_to <= poss_to)) STRICT;
CREATE INDEX feed_reel ON feed(reel);
CREATE INDEX feed_at ON feed(ord, designator, poss_from);
CREATE INDEX feed_repair ON feed(ord, designator, poss_from, since_us) WHERE repair = 1 AND dropped_us IS NULL;
)sql";

// For the plain sqlite3 shell. They keep to one SELECT each, so that conditions reach the indexes.
constexpr const char* views = R"sql(
CREATE VIEW carries AS
  SELECT b.serial, f.designator, r.name AS reel,
         CASE WHEN d.build_no BETWEEN f.cert_from AND f.cert_to THEN 'certain' ELSE 'possible' END AS how,
         d.board AS board_id, f.reel AS reel_id
  FROM feed f JOIN build d ON d.ord = f.ord AND d.build_no BETWEEN f.poss_from AND f.poss_to
  JOIN board b ON b.id = d.board JOIN reel r ON r.id = f.reel
  WHERE f.dropped_us IS NULL AND NOT EXISTS(
    SELECT 1 FROM feed w WHERE w.repair = 1 AND w.dropped_us IS NULL AND w.ord = d.ord AND
    w.designator = f.designator AND w.poss_from = d.build_no AND (f.repair = 0 OR w.since_us > f.since_us));

CREATE VIEW results AS
  SELECT b.serial, t.id AS trial,
         strftime('%Y-%m-%dT%H:%M:%S', t.at_us / 1000000, 'unixepoch') ||
           format('.%03dZ', t.at_us / 1000 % 1000) AS at,
         t.attempt,
         CASE t.judgement WHEN 0 THEN 'GO' WHEN 1 THEN 'NO-GO' ELSE 'VOID' END AS judgement,
         m.step, m.name AS metric, m.variant, m.unit, x.value, x.u, x.n,
         CASE x.state WHEN 0 THEN 'measured' WHEN 1 THEN 'over range' WHEN 2 THEN 'not settled' WHEN 3 THEN 'no data'
           ELSE 'skipped' END AS state,
         CASE x.verdict WHEN 0 THEN 'met' WHEN 1 THEN 'missed' WHEN 2 THEN 'unsure' WHEN 3 THEN 'no evidence'
           WHEN 4 THEN 'recorded' ELSE 'invalid' END AS verdict,
         l.low, l.high, l.spec_low, l.spec_high
  FROM finding x JOIN trial t ON t.id = x.trial JOIN board b ON b.id = t.board JOIN metric m ON m.id = x.metric
  LEFT JOIN applied_limit l ON l.applied = t.applied AND l.metric = x.metric;

CREATE VIEW results_by_reel AS
  SELECT b.serial, t.id AS trial,
         strftime('%Y-%m-%dT%H:%M:%S', t.at_us / 1000000, 'unixepoch') ||
           format('.%03dZ', t.at_us / 1000 % 1000) AS at,
         t.attempt,
         CASE t.judgement WHEN 0 THEN 'GO' WHEN 1 THEN 'NO-GO' ELSE 'VOID' END AS judgement,
         m.step, m.name AS metric, m.variant, m.unit, x.value, x.u,
         CASE x.verdict WHEN 0 THEN 'met' WHEN 1 THEN 'missed' WHEN 2 THEN 'unsure' WHEN 3 THEN 'no evidence'
           WHEN 4 THEN 'recorded' ELSE 'invalid' END AS verdict,
         l.low, l.high, f.designator, r.name AS reel, o.maker, o.part, o.lot, r.date_code, r.distributor,
         CASE WHEN d.build_no BETWEEN f.cert_from AND f.cert_to THEN 'certain' ELSE 'possible' END AS how
  FROM feed f JOIN build d ON d.ord = f.ord AND d.build_no BETWEEN f.poss_from AND f.poss_to
  JOIN board b ON b.id = d.board JOIN reel r ON r.id = f.reel JOIN lot o ON o.id = r.lot
  JOIN trial t ON t.board = d.board JOIN finding x ON x.trial = t.id JOIN metric m ON m.id = x.metric
  LEFT JOIN applied_limit l ON l.applied = t.applied AND l.metric = x.metric
  WHERE f.dropped_us IS NULL AND NOT EXISTS(
    SELECT 1 FROM feed w WHERE w.repair = 1 AND w.dropped_us IS NULL AND w.ord = d.ord AND
    w.designator = f.designator AND w.poss_from = d.build_no AND (f.repair = 0 OR w.since_us > f.since_us));

-- judgement and at: of the trial that speaks for the board; NULL before its first.
CREATE VIEW boards AS
  SELECT b.serial, o.name AS order_name, d.build_no, d.panel, o.product,
         CASE t.judgement WHEN 0 THEN 'GO' WHEN 1 THEN 'NO-GO' WHEN 2 THEN 'VOID' END AS judgement,
         strftime('%Y-%m-%dT%H:%M:%S', t.at_us / 1000000, 'unixepoch') ||
           format('.%03dZ', t.at_us / 1000 % 1000) AS at,
         (SELECT count(*) FROM trial n WHERE n.board = b.id) AS trials
  FROM board b LEFT JOIN build d ON d.board = b.id LEFT JOIN product_order o ON o.id = d.ord
  LEFT JOIN trial t ON t.board = b.id AND t.counts = 1;
)sql";

// Every record in a chain a station and epoch: docs/store.md. Rows that lists brought name the record that brought
// them.
constexpr const char* layout_2 = R"sql(
CREATE TABLE entered(
  id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, kind TEXT NOT NULL, name TEXT NOT NULL, who TEXT) STRICT;
-- kind: 1 trial begun, 2 trial ended, 3 list entered. uuid: of the trial or of the row in `entered`.
CREATE TABLE journal(
  station INTEGER NOT NULL REFERENCES station, epoch INTEGER NOT NULL, seq INTEGER NOT NULL, kind INTEGER NOT NULL,
  uuid BLOB NOT NULL, at_us INTEGER NOT NULL, body_sha256 BLOB NOT NULL, hash BLOB NOT NULL,
  PRIMARY KEY(station, epoch, seq)) STRICT, WITHOUT ROWID;
ALTER TABLE product_order ADD COLUMN entered INTEGER REFERENCES entered;
ALTER TABLE build ADD COLUMN entered INTEGER REFERENCES entered;
ALTER TABLE reel ADD COLUMN entered INTEGER REFERENCES entered;
ALTER TABLE feed ADD COLUMN entered INTEGER REFERENCES entered;
CREATE INDEX product_order_entered ON product_order(entered);
CREATE INDEX build_entered ON build(entered);
CREATE INDEX reel_entered ON reel(entered);
CREATE INDEX feed_entered ON feed(entered);
)sql";

// One record a trial instead of two. What layout 2 hashed by integer keys is hashed by content: migrate.cpp does so.
constexpr const char* layout_3 = R"sql(
-- While a trial runs: the hash of its row as begun; its record covers the row from then on. trial.state: 0 open,
-- 1 ended, 2 cut short by the end of its program.
ALTER TABLE trial ADD COLUMN mark BLOB;
-- Readings that were archived away leave their hash.
ALTER TABLE reading_blob RENAME TO reading_blob_2;
CREATE TABLE reading_blob(
  trial INTEGER PRIMARY KEY REFERENCES trial, format INTEGER NOT NULL, body BLOB, sha256 BLOB,
  CHECK((body IS NULL) = (sha256 IS NOT NULL))) STRICT;
INSERT INTO reading_blob SELECT trial, format, body, NULL FROM reading_blob_2;
DROP TABLE reading_blob_2;
-- journal.kind: 3 list entered, 4 trial, 5 epoch begun, 6 readings archived, 7 act. Where the chain before an epoch ended.
CREATE TABLE epoch_begun(
  id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, reason TEXT NOT NULL, who TEXT, last_epoch INTEGER,
  last_seq INTEGER, last_hash BLOB) STRICT;
CREATE TABLE archived(
  id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, who TEXT, before_us INTEGER NOT NULL, trials INTEGER NOT NULL,
  bytes INTEGER NOT NULL, name TEXT NOT NULL, sha256 BLOB NOT NULL) STRICT;
-- What people and the line do beside trials: act.hpp.
CREATE TABLE act(
  id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, station INTEGER NOT NULL REFERENCES station, kind TEXT NOT NULL,
  at_us INTEGER NOT NULL, who TEXT, second TEXT, reason TEXT, about TEXT, ends BLOB, trial BLOB)
  STRICT;
CREATE INDEX act_kind ON act(kind, about);
CREATE INDEX act_ends ON act(ends) WHERE ends IS NOT NULL;
CREATE INDEX act_trial ON act(trial) WHERE trial IS NOT NULL;
-- attempts: the board's trials then, for the order of its events, whatever the clock said.
CREATE TABLE act_board(
  act INTEGER NOT NULL REFERENCES act, board INTEGER NOT NULL REFERENCES board, attempts INTEGER NOT NULL,
  PRIMARY KEY(act, board)) STRICT, WITHOUT ROWID;
CREATE INDEX act_board_board ON act_board(board);
CREATE TABLE act_value(
  act INTEGER NOT NULL REFERENCES act, key TEXT NOT NULL, value TEXT NOT NULL, PRIMARY KEY(act, key)) STRICT,
  WITHOUT ROWID;
-- Who may do what, from the acts of kind "person"; password: Argon2id as libsodium writes it, in no record.
CREATE TABLE credential(
  name TEXT PRIMARY KEY, role TEXT NOT NULL, badge TEXT UNIQUE, password TEXT, gone INTEGER NOT NULL) STRICT,
  WITHOUT ROWID;
-- A feed that a later record took back.
ALTER TABLE feed ADD COLUMN dropped_by INTEGER REFERENCES entered;
CREATE INDEX feed_dropped ON feed(dropped_by) WHERE dropped_by IS NOT NULL;
-- purpose: 0 a board of an order, 1 the jig's check, 2 a reference board, 3 a reject sample.
ALTER TABLE trial ADD COLUMN purpose INTEGER NOT NULL DEFAULT 0;
-- Number of the revision that was in force; 0 = it was played with other files; NULL = none was in force.
ALTER TABLE trial ADD COLUMN adopted INTEGER;
-- One metric's findings over 512 trials, ids 512 * stretch + 1 to 512 * stretch + 512: derived, see columns.hpp.
CREATE TABLE column_block(
  metric INTEGER NOT NULL REFERENCES metric, stretch INTEGER NOT NULL, body BLOB NOT NULL,
  PRIMARY KEY(metric, stretch)) STRICT, WITHOUT ROWID;
)sql";

bool is_empty(Database& database) {
  return database.first("SELECT count(*) FROM sqlite_schema").value_or(1) == 0;
}

Error refusal(const Database& database, std::string what, std::string to_do) {
  return {Error::Kind::store, std::move(what), database.path(), std::move(to_do)};
}

void mark_layout(Database& database) {
  database.script(
      fmt::format("PRAGMA application_id = {}; PRAGMA user_version = {}", application_id, layout_version).c_str());
}

Result<Done> make_schema(Database& database, std::string_view uuid) {
  database.script("PRAGMA journal_mode = WAL");
  if (database.failed()) return database.error();
  Transaction transaction(database, Transaction::Kind::write);
  if (!is_empty(database)) return transaction.commit();  // another process was first
  lay_out(database);
  database.run("INSERT INTO meta VALUES('store', ?)", Blob{uuid});
  return transaction.commit();
}

Result<std::int64_t> check_schema(Database& database) {
  const auto marked = database.first("PRAGMA application_id");
  const auto version = database.first("PRAGMA user_version");
  if (database.failed()) return database.error();
  if (marked.value_or(0) != application_id)
    return refusal(database, "this SQLite file is not a store of this program",
                   "name a store that this program made, or a path where none stands yet");
  if (*version > layout_version)
    return refusal(database,
                   fmt::format("a newer program made this store (layout {}, this program knows layout {})", *version,
                               layout_version),
                   "use the newer program; nothing was changed");
  if (*version < 1)
    return refusal(database, fmt::format("this store has the unknown layout {}", *version),
                   "restore it from a backup; nothing was changed");
  return *version;
}

}  // namespace

void lay_out(Database& database) {
  database.script(layout_1);
  database.script(views);
  database.script(layout_2);
  database.script(layout_3);
  mark_layout(database);
}

void lay_out_after(Database& database, std::int64_t layout) {
  if (layout < 2) database.script(layout_2);
  if (layout < 3) database.script(layout_3);
  mark_layout(database);
}

Result<std::int64_t> settle_schema(Database& database, bool create, std::string_view uuid) {
  // The log beside the store grows while a long reading lasts, and shrinks again behind it to a few MB.
  database.script("PRAGMA foreign_keys = ON; PRAGMA synchronous = FULL; PRAGMA journal_size_limit = 16777216");
  const bool empty = is_empty(database);
  if (database.failed()) return database.error();
  if (empty && !create) return refusal(database, "there is no store in this file", "check the path");
  if (empty) {
    const auto made = make_schema(database, uuid);
    if (!made) return made.error();
  }
  return check_schema(database);
}

}  // namespace jigwright
