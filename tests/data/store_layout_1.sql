-- A store of layout 1 as the program made it then: lists of three boards, two reels and two feeds; five trials.
PRAGMA application_id = 1246316375;
PRAGMA user_version = 1;
BEGIN TRANSACTION;
CREATE TABLE applied(id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE) STRICT;
INSERT INTO "applied" VALUES(1,X'BEAAB7353E52B6234352ED207A73E2FC53191BD8D05275694AA4AE71722052FB');
CREATE TABLE applied_limit(
  applied INTEGER NOT NULL REFERENCES applied, metric INTEGER NOT NULL REFERENCES metric,
  spec_low REAL, spec_high REAL, nominal REAL, guard INTEGER NOT NULL, share REAL, u_budget REAL,
  u_of_reading REAL, width REAL, low REAL, high REAL, reason TEXT,
  PRIMARY KEY(applied, metric)) STRICT, WITHOUT ROWID;
INSERT INTO "applied_limit" VALUES(1,1,-0.0005,0.0005,0.0,0,1.0,2.0e-05,0.0,2.0e-05,-0.00048,0.00048,NULL);
INSERT INTO "applied_limit" VALUES(1,2,-0.0005,0.0005,0.0,0,1.0,2.0e-05,0.0,2.0e-05,-0.00048,0.00048,NULL);
CREATE TABLE board(id INTEGER PRIMARY KEY, serial TEXT NOT NULL UNIQUE) STRICT;
INSERT INTO "board" VALUES(1,'TB-01');
INSERT INTO "board" VALUES(2,'TB-02');
INSERT INTO "board" VALUES(3,'TB-03');
INSERT INTO "board" VALUES(4,'TB-99');
CREATE TABLE build(
  ord INTEGER NOT NULL REFERENCES product_order, build_no INTEGER NOT NULL, board INTEGER NOT NULL REFERENCES board,
  panel TEXT, PRIMARY KEY(ord, build_no)) STRICT, WITHOUT ROWID;
INSERT INTO "build" VALUES(1,1,1,'P-1');
INSERT INTO "build" VALUES(1,2,2,'P-1');
INSERT INTO "build" VALUES(1,3,3,'P-2');
CREATE TABLE document(
  id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE CHECK(length(sha256) = 32), kind TEXT NOT NULL,
  name TEXT NOT NULL,  -- as first given
  body TEXT NOT NULL) STRICT;
INSERT INTO "document" VALUES(1,X'FA228E4B31A4530EB50F6EC3D302D7AB7264AD620F392FC80EE02FAD0F031D80','plan','plan.toml','[plan]');
INSERT INTO "document" VALUES(2,X'72D0579C60339806D2A135DC1684160D357B13319DF5674760C99940259D530A','limits','limits.toml','[limits]');
CREATE TABLE equipment(id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE) STRICT;
INSERT INTO "equipment" VALUES(1,X'6412B25C4B7E6661109200CC5F4D7F91517421BB31F7464A4A6643A8D19ACB6F');
CREATE TABLE equipment_instrument(
  equipment INTEGER NOT NULL REFERENCES equipment, instrument INTEGER NOT NULL REFERENCES instrument,
  PRIMARY KEY(equipment, instrument)) STRICT, WITHOUT ROWID;
INSERT INTO "equipment_instrument" VALUES(1,1);
CREATE TABLE feed(
  id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, ord INTEGER NOT NULL REFERENCES product_order,
  designator TEXT NOT NULL, reel INTEGER NOT NULL REFERENCES reel,
  poss_from INTEGER NOT NULL, cert_from INTEGER NOT NULL, cert_to INTEGER NOT NULL, poss_to INTEGER NOT NULL,
  repair INTEGER NOT NULL DEFAULT 0, since_us INTEGER,  -- true of the boards from
  known_us INTEGER NOT NULL, dropped_us INTEGER,        -- true of the records from, to
  CHECK(poss_from <= poss_to AND poss_from <= cert_from AND cert_to <= poss_to)) STRICT;
INSERT INTO "feed" VALUES(1,X'01A2322A3C7D71C2AFF71B9BE0AD2654',1,'U7',1,1,1,1,2,0,NULL,1767960000000000,NULL);
INSERT INTO "feed" VALUES(2,X'01A2322A3C7D71C2AFF71B9BE0AD2656',1,'U7',2,2,3,3,3,0,NULL,1767960000000000,NULL);
CREATE TABLE finding(
  trial INTEGER NOT NULL REFERENCES trial, metric INTEGER NOT NULL REFERENCES metric, value REAL, u REAL,
  n INTEGER NOT NULL, state INTEGER NOT NULL, verdict INTEGER NOT NULL,
  PRIMARY KEY(trial, metric)) STRICT, WITHOUT ROWID;
INSERT INTO "finding" VALUES(1,1,0.0006,4.0e-06,10,0,1);
INSERT INTO "finding" VALUES(1,2,0.0002,4.0e-06,10,0,0);
INSERT INTO "finding" VALUES(1,3,1.5e-06,NULL,3,0,4);
INSERT INTO "finding" VALUES(2,1,0.0001,4.0e-06,10,0,0);
INSERT INTO "finding" VALUES(2,2,0.0002,4.0e-06,10,0,0);
INSERT INTO "finding" VALUES(2,3,1.5e-06,NULL,3,0,4);
INSERT INTO "finding" VALUES(3,1,0.0001,4.0e-06,10,0,0);
INSERT INTO "finding" VALUES(3,2,0.0002,4.0e-06,10,0,0);
INSERT INTO "finding" VALUES(3,3,1.5e-06,NULL,3,0,4);
INSERT INTO "finding" VALUES(4,1,0.0001,4.0e-06,10,0,0);
INSERT INTO "finding" VALUES(4,2,0.0002,4.0e-06,10,0,0);
INSERT INTO "finding" VALUES(4,3,1.5e-06,NULL,3,0,4);
CREATE TABLE instrument(
  id INTEGER PRIMARY KEY, instrument TEXT NOT NULL, maker TEXT NOT NULL, model TEXT NOT NULL, serial TEXT NOT NULL,
  firmware TEXT NOT NULL, UNIQUE(instrument, maker, model, serial, firmware)) STRICT;
INSERT INTO "instrument" VALUES(1,'meter','Alder Works','M6','0001','1.0');
CREATE TABLE lot(
  id INTEGER PRIMARY KEY, maker TEXT NOT NULL, part TEXT NOT NULL, lot TEXT NOT NULL, UNIQUE(maker, part, lot)) STRICT;
INSERT INTO "lot" VALUES(1,'Alder','OA','L1');
INSERT INTO "lot" VALUES(2,'Birch','OA','L2');
CREATE TABLE meta(key TEXT PRIMARY KEY, value ANY NOT NULL) STRICT, WITHOUT ROWID;
INSERT INTO "meta" VALUES('origin',1);
INSERT INTO "meta" VALUES('store',X'01A2322A3C7D71C2AFF71B9BE0AD2651');
CREATE TABLE metric(
  id INTEGER PRIMARY KEY, step TEXT NOT NULL, name TEXT NOT NULL, variant TEXT NOT NULL, unit TEXT NOT NULL,
  about INTEGER NOT NULL, UNIQUE(step, name, variant, unit, about)) STRICT;
INSERT INTO "metric" VALUES(1,'offset','offset','x1','V',0);
INSERT INTO "metric" VALUES(2,'offset','offset','x10','V',0);
INSERT INTO "metric" VALUES(3,'known','zero','','V',1);
CREATE TABLE person(id INTEGER PRIMARY KEY, name TEXT NOT NULL UNIQUE) STRICT;
INSERT INTO "person" VALUES(1,'A. Tester');
CREATE TABLE product_order(id INTEGER PRIMARY KEY, name TEXT NOT NULL UNIQUE, product TEXT) STRICT;
INSERT INTO "product_order" VALUES(1,'WO-1','amp');
CREATE TABLE reading_blob(
  trial INTEGER PRIMARY KEY REFERENCES trial, format INTEGER NOT NULL, body BLOB NOT NULL) STRICT;
INSERT INTO "reading_blob" VALUES(1,1,X'01007F');
INSERT INTO "reading_blob" VALUES(2,1,X'01007F');
INSERT INTO "reading_blob" VALUES(3,1,X'01007F');
INSERT INTO "reading_blob" VALUES(4,1,X'01007F');
CREATE TABLE reduction(id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE) STRICT;
INSERT INTO "reduction" VALUES(1,X'B225C12E67F96E089C1BB7A0490AF84722E46F631C725DCDD8A2D6705A56E812');
CREATE TABLE reduction_step(
  reduction INTEGER NOT NULL REFERENCES reduction, kind TEXT NOT NULL, version INTEGER NOT NULL,
  PRIMARY KEY(reduction, kind)) STRICT, WITHOUT ROWID;
INSERT INTO "reduction_step" VALUES(1,'known-value',2);
INSERT INTO "reduction_step" VALUES(1,'offset',1);
CREATE TABLE reel(
  id INTEGER PRIMARY KEY, name TEXT NOT NULL UNIQUE, lot INTEGER NOT NULL REFERENCES lot,
  date_code TEXT,                              -- ISO 8601 week, "2024-W31"
  distributor TEXT, rereeled INTEGER, quantity INTEGER, marking TEXT) STRICT;
INSERT INTO "reel" VALUES(1,'R-1',1,'2025-W31','Delta',0,100,'K1');
INSERT INTO "reel" VALUES(2,'R-2',2,NULL,NULL,1,NULL,NULL);
CREATE TABLE revision(
  id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, limit_set TEXT NOT NULL, number INTEGER NOT NULL,
  document INTEGER REFERENCES document) STRICT;
INSERT INTO "revision" VALUES(1,X'01A2322A3C7D71C2AFF71B9BE0AD2659','limits-1',3,2);
CREATE TABLE setup(
  id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE, plan TEXT NOT NULL, program TEXT NOT NULL) STRICT;
INSERT INTO "setup" VALUES(1,X'F2368AC1D7924BAA07A19CECCDBE6AC833E388E7F1E9A623143E8A61788EFF64','plan-1','jigwright 0.1.0');
CREATE TABLE setup_document(
  setup INTEGER NOT NULL REFERENCES setup, document INTEGER NOT NULL REFERENCES document,
  PRIMARY KEY(setup, document)) STRICT, WITHOUT ROWID;
INSERT INTO "setup_document" VALUES(1,1);
INSERT INTO "setup_document" VALUES(1,2);
CREATE TABLE station(id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, name TEXT NOT NULL UNIQUE) STRICT;
INSERT INTO "station" VALUES(1,X'01A2322A3C7D71C2AFF71B9BE0AD2657','station');
INSERT INTO "station" VALUES(2,X'01A2322A3C7D71C2AFF71B9BE0AD265A','bench 1');
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
INSERT INTO "trial" VALUES(1,X'01A2322A3C7D71C2AFF71B9BE0AD2658',1,1,2,1,1767960000000000,2200,1,1,NULL,1,1,1,1,1,1,1,1,1,'full',23.5,NULL,1,1,1,-2.49999999999999861222e-01);
INSERT INTO "trial" VALUES(2,X'01A2322A3C7D71C2AFF71B9BE0AD265B',1,1,2,1,1767960000000000,2200,1,0,NULL,1,2,0,1,1,1,1,1,1,'full',23.5,NULL,0,NULL,2,5.83333333333333259318e-01);
INSERT INTO "trial" VALUES(3,X'01A2322A3C7D71C2AFF71B9BE0AD265C',2,1,2,1,1767960000000000,2200,1,2,'the lid was opened',1,1,1,1,1,1,1,1,1,'full',23.5,NULL,0,NULL,2,5.83333333333333259318e-01);
INSERT INTO "trial" VALUES(4,X'01A2322A3C7D71C2AFF71B9BE0AD265D',4,1,2,1,1767960000000000,2200,1,0,NULL,1,1,1,1,1,1,1,1,1,'full',23.5,NULL,0,NULL,2,5.83333333333333259318e-01);
INSERT INTO "trial" VALUES(5,X'01A2322A3C7D71C2AFF71B9BE0AD265E',3,1,2,1,1767960000000000,NULL,0,2,'the program ended in mid-trial',1,1,1,1,1,NULL,NULL,NULL,1,'full',NULL,NULL,0,NULL,NULL,NULL);
CREATE UNIQUE INDEX build_board ON build(board);
CREATE INDEX revision_number ON revision(limit_set, number);
CREATE INDEX trial_board ON trial(board, id);
CREATE INDEX reel_lot ON reel(lot);
CREATE INDEX feed_reel ON feed(reel);
CREATE INDEX feed_at ON feed(ord, designator, poss_from);
CREATE INDEX feed_repair ON feed(ord, designator, poss_from, since_us) WHERE repair = 1 AND dropped_us IS NULL;
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
CREATE VIEW boards AS
  SELECT b.serial, o.name AS order_name, d.build_no, d.panel, o.product,
         CASE t.judgement WHEN 0 THEN 'GO' WHEN 1 THEN 'NO-GO' WHEN 2 THEN 'VOID' END AS judgement,
         strftime('%Y-%m-%dT%H:%M:%S', t.at_us / 1000000, 'unixepoch') ||
           format('.%03dZ', t.at_us / 1000 % 1000) AS at,
         (SELECT count(*) FROM trial n WHERE n.board = b.id) AS trials
  FROM board b LEFT JOIN build d ON d.board = b.id LEFT JOIN product_order o ON o.id = d.ord
  LEFT JOIN trial t ON t.board = b.id AND t.counts = 1;
COMMIT;
