-- A store of layout 2 as the program made it then: the store of layout 1 brought up to date, and one more list.
PRAGMA application_id = 1246316375;
PRAGMA user_version = 2;
PRAGMA foreign_keys=OFF;
BEGIN TRANSACTION;
CREATE TABLE applied(id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE) STRICT;
INSERT INTO applied VALUES(1,X'beaab7353e52b6234352ed207a73e2fc53191bd8d05275694aa4ae71722052fb');
CREATE TABLE applied_limit(
  applied INTEGER NOT NULL REFERENCES applied, metric INTEGER NOT NULL REFERENCES metric,
  spec_low REAL, spec_high REAL, nominal REAL, guard INTEGER NOT NULL, share REAL, u_budget REAL,
  u_of_reading REAL, width REAL, low REAL, high REAL, reason TEXT,
  PRIMARY KEY(applied, metric)) STRICT, WITHOUT ROWID;
INSERT INTO applied_limit VALUES(1,1,-0.0005000000000000000104,0.0005000000000000000104,0.0,0,1.0,2.0000000000000001634e-05,0.0,2.0000000000000001634e-05,-0.00048000000000000001216,0.00048000000000000001216,NULL);
INSERT INTO applied_limit VALUES(1,2,-0.0005000000000000000104,0.0005000000000000000104,0.0,0,1.0,2.0000000000000001634e-05,0.0,2.0000000000000001634e-05,-0.00048000000000000001216,0.00048000000000000001216,NULL);
CREATE TABLE board(id INTEGER PRIMARY KEY, serial TEXT NOT NULL UNIQUE) STRICT;
INSERT INTO board VALUES(1,'TB-01');
INSERT INTO board VALUES(2,'TB-02');
INSERT INTO board VALUES(3,'TB-03');
INSERT INTO board VALUES(4,'TB-99');
INSERT INTO board VALUES(5,'TB-04');
CREATE TABLE build(
  ord INTEGER NOT NULL REFERENCES product_order, build_no INTEGER NOT NULL, board INTEGER NOT NULL REFERENCES board,
  panel TEXT, entered INTEGER REFERENCES entered, PRIMARY KEY(ord, build_no)) STRICT, WITHOUT ROWID;
INSERT INTO build VALUES(1,1,1,'P-1',1);
INSERT INTO build VALUES(1,2,2,'P-1',1);
INSERT INTO build VALUES(1,3,3,'P-2',1);
INSERT INTO build VALUES(1,4,5,'P-2',2);
CREATE TABLE document(
  id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE CHECK(length(sha256) = 32), kind TEXT NOT NULL,
  name TEXT NOT NULL,  -- as first given
  body TEXT NOT NULL) STRICT;
INSERT INTO document VALUES(1,X'fa228e4b31a4530eb50f6ec3d302d7ab7264ad620f392fc80ee02fad0f031d80','plan','plan.toml','[plan]');
INSERT INTO document VALUES(2,X'72d0579c60339806d2a135dc1684160d357b13319df5674760c99940259d530a','limits','limits.toml','[limits]');
CREATE TABLE equipment(id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE) STRICT;
INSERT INTO equipment VALUES(1,X'6412b25c4b7e6661109200cc5f4d7f91517421bb31f7464a4a6643a8d19acb6f');
CREATE TABLE equipment_instrument(
  equipment INTEGER NOT NULL REFERENCES equipment, instrument INTEGER NOT NULL REFERENCES instrument,
  PRIMARY KEY(equipment, instrument)) STRICT, WITHOUT ROWID;
INSERT INTO equipment_instrument VALUES(1,1);
CREATE TABLE feed(
  id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, ord INTEGER NOT NULL REFERENCES product_order,
  designator TEXT NOT NULL, reel INTEGER NOT NULL REFERENCES reel,
  poss_from INTEGER NOT NULL, cert_from INTEGER NOT NULL, cert_to INTEGER NOT NULL, poss_to INTEGER NOT NULL,
  repair INTEGER NOT NULL DEFAULT 0, since_us INTEGER,  -- true of the boards from
  known_us INTEGER NOT NULL, dropped_us INTEGER, entered INTEGER REFERENCES entered,        -- true of the records from, to
  CHECK(poss_from <= poss_to AND poss_from <= cert_from AND cert_to <= poss_to)) STRICT;
INSERT INTO feed VALUES(1,X'01a2322a3c7d71c2aff71b9be0ad2654',1,'U7',1,1,1,1,2,0,NULL,1767960000000000,NULL,1);
INSERT INTO feed VALUES(2,X'01a2322a3c7d71c2aff71b9be0ad2656',1,'U7',2,2,3,3,3,0,NULL,1767960000000000,NULL,1);
CREATE TABLE finding(
  trial INTEGER NOT NULL REFERENCES trial, metric INTEGER NOT NULL REFERENCES metric, value REAL, u REAL,
  n INTEGER NOT NULL, state INTEGER NOT NULL, verdict INTEGER NOT NULL,
  PRIMARY KEY(trial, metric)) STRICT, WITHOUT ROWID;
INSERT INTO finding VALUES(1,1,0.00059999999999999994743,3.9999999999999998188e-06,10,0,1);
INSERT INTO finding VALUES(1,2,0.00020000000000000000958,3.9999999999999998188e-06,10,0,0);
INSERT INTO finding VALUES(1,3,1.5000000000000000379e-06,NULL,3,0,4);
INSERT INTO finding VALUES(2,1,0.00010000000000000000479,3.9999999999999998188e-06,10,0,0);
INSERT INTO finding VALUES(2,2,0.00020000000000000000958,3.9999999999999998188e-06,10,0,0);
INSERT INTO finding VALUES(2,3,1.5000000000000000379e-06,NULL,3,0,4);
INSERT INTO finding VALUES(3,1,0.00010000000000000000479,3.9999999999999998188e-06,10,0,0);
INSERT INTO finding VALUES(3,2,0.00020000000000000000958,3.9999999999999998188e-06,10,0,0);
INSERT INTO finding VALUES(3,3,1.5000000000000000379e-06,NULL,3,0,4);
INSERT INTO finding VALUES(4,1,0.00010000000000000000479,3.9999999999999998188e-06,10,0,0);
INSERT INTO finding VALUES(4,2,0.00020000000000000000958,3.9999999999999998188e-06,10,0,0);
INSERT INTO finding VALUES(4,3,1.5000000000000000379e-06,NULL,3,0,4);
CREATE TABLE instrument(
  id INTEGER PRIMARY KEY, instrument TEXT NOT NULL, maker TEXT NOT NULL, model TEXT NOT NULL, serial TEXT NOT NULL,
  firmware TEXT NOT NULL, UNIQUE(instrument, maker, model, serial, firmware)) STRICT;
INSERT INTO instrument VALUES(1,'meter','Alder Works','M6','0001','1.0');
CREATE TABLE lot(
  id INTEGER PRIMARY KEY, maker TEXT NOT NULL, part TEXT NOT NULL, lot TEXT NOT NULL, UNIQUE(maker, part, lot)) STRICT;
INSERT INTO lot VALUES(1,'Alder','OA','L1');
INSERT INTO lot VALUES(2,'Birch','OA','L2');
CREATE TABLE meta(key TEXT PRIMARY KEY, value ANY NOT NULL) STRICT, WITHOUT ROWID;
INSERT INTO meta VALUES('origin',1);
INSERT INTO meta VALUES('store',X'01a2322a3c7d71c2aff71b9be0ad2651');
CREATE TABLE metric(
  id INTEGER PRIMARY KEY, step TEXT NOT NULL, name TEXT NOT NULL, variant TEXT NOT NULL, unit TEXT NOT NULL,
  about INTEGER NOT NULL, UNIQUE(step, name, variant, unit, about)) STRICT;
INSERT INTO metric VALUES(1,'offset','offset','x1','V',0);
INSERT INTO metric VALUES(2,'offset','offset','x10','V',0);
INSERT INTO metric VALUES(3,'known','zero','','V',1);
CREATE TABLE person(id INTEGER PRIMARY KEY, name TEXT NOT NULL UNIQUE) STRICT;
INSERT INTO person VALUES(1,'A. Tester');
CREATE TABLE product_order(id INTEGER PRIMARY KEY, name TEXT NOT NULL UNIQUE, product TEXT, entered INTEGER REFERENCES entered) STRICT;
INSERT INTO product_order VALUES(1,'WO-1','amp',1);
CREATE TABLE reading_blob(
  trial INTEGER PRIMARY KEY REFERENCES trial, format INTEGER NOT NULL, body BLOB NOT NULL) STRICT;
INSERT INTO reading_blob VALUES(1,1,X'01007f');
INSERT INTO reading_blob VALUES(2,1,X'01007f');
INSERT INTO reading_blob VALUES(3,1,X'01007f');
INSERT INTO reading_blob VALUES(4,1,X'01007f');
CREATE TABLE reduction(id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE) STRICT;
INSERT INTO reduction VALUES(1,X'b225c12e67f96e089c1bb7a0490af84722e46f631c725dcdd8a2d6705a56e812');
CREATE TABLE reduction_step(
  reduction INTEGER NOT NULL REFERENCES reduction, kind TEXT NOT NULL, version INTEGER NOT NULL,
  PRIMARY KEY(reduction, kind)) STRICT, WITHOUT ROWID;
INSERT INTO reduction_step VALUES(1,'known-value',2);
INSERT INTO reduction_step VALUES(1,'offset',1);
CREATE TABLE reel(
  id INTEGER PRIMARY KEY, name TEXT NOT NULL UNIQUE, lot INTEGER NOT NULL REFERENCES lot,
  date_code TEXT,                              -- ISO 8601 week, "2024-W31"
  distributor TEXT, rereeled INTEGER, quantity INTEGER, marking TEXT, entered INTEGER REFERENCES entered) STRICT;
INSERT INTO reel VALUES(1,'R-1',1,'2025-W31','Delta',0,100,'K1',1);
INSERT INTO reel VALUES(2,'R-2',2,NULL,NULL,1,NULL,NULL,1);
CREATE TABLE revision(
  id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, limit_set TEXT NOT NULL, number INTEGER NOT NULL,
  document INTEGER REFERENCES document) STRICT;
INSERT INTO revision VALUES(1,X'01a2322a3c7d71c2aff71b9be0ad2659','limits-1',3,2);
CREATE TABLE setup(
  id INTEGER PRIMARY KEY, sha256 BLOB NOT NULL UNIQUE, plan TEXT NOT NULL, program TEXT NOT NULL) STRICT;
INSERT INTO setup VALUES(1,X'f2368ac1d7924baa07a19ceccdbe6ac833e388e7f1e9a623143e8a61788eff64','plan-1','jigwright 0.1.0');
CREATE TABLE setup_document(
  setup INTEGER NOT NULL REFERENCES setup, document INTEGER NOT NULL REFERENCES document,
  PRIMARY KEY(setup, document)) STRICT, WITHOUT ROWID;
INSERT INTO setup_document VALUES(1,1);
INSERT INTO setup_document VALUES(1,2);
CREATE TABLE station(id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, name TEXT NOT NULL UNIQUE) STRICT;
INSERT INTO station VALUES(1,X'01a2322a3c7d71c2aff71b9be0ad2657','station');
INSERT INTO station VALUES(2,X'01a2322a3c7d71c2aff71b9be0ad265a','bench 1');
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
INSERT INTO trial VALUES(1,X'01a2322a3c7d71c2aff71b9be0ad2658',1,1,2,1,1767960000000000,2200,1,1,NULL,1,1,1,1,1,1,1,1,1,'full',23.499999999999999999,NULL,1,1,1,-0.24999999999999986122);
INSERT INTO trial VALUES(2,X'01a2322a3c7d71c2aff71b9be0ad265b',1,1,2,1,1767960000000000,2200,1,0,NULL,1,2,0,1,1,1,1,1,1,'full',23.499999999999999999,NULL,0,NULL,2,0.58333333333333325931);
INSERT INTO trial VALUES(3,X'01a2322a3c7d71c2aff71b9be0ad265c',2,1,2,1,1767960000000000,2200,1,2,'the lid was opened',1,1,1,1,1,1,1,1,1,'full',23.499999999999999999,NULL,0,NULL,2,0.58333333333333325931);
INSERT INTO trial VALUES(4,X'01a2322a3c7d71c2aff71b9be0ad265d',4,1,2,1,1767960000000000,2200,1,0,NULL,1,1,1,1,1,1,1,1,1,'full',23.499999999999999999,NULL,0,NULL,2,0.58333333333333325931);
INSERT INTO trial VALUES(5,X'01a2322a3c7d71c2aff71b9be0ad265e',3,1,2,1,1767960000000000,NULL,0,2,'the program ended in mid-trial',1,1,1,1,1,NULL,NULL,NULL,1,'full',NULL,NULL,0,NULL,NULL,NULL);
CREATE TABLE entered(
  id INTEGER PRIMARY KEY, uuid BLOB NOT NULL UNIQUE, kind TEXT NOT NULL, name TEXT NOT NULL, who TEXT) STRICT;
INSERT INTO entered VALUES(1,X'01a23264e87a752896edcf683f5912ad','lists','all lists of layout 1',NULL);
INSERT INTO entered VALUES(2,X'01a23264e88877519da4e9abd71e72e6','boards','more.csv',NULL);
CREATE TABLE journal(
  station INTEGER NOT NULL REFERENCES station, epoch INTEGER NOT NULL, seq INTEGER NOT NULL, kind INTEGER NOT NULL,
  uuid BLOB NOT NULL, at_us INTEGER NOT NULL, body_sha256 BLOB NOT NULL, hash BLOB NOT NULL,
  PRIMARY KEY(station, epoch, seq)) STRICT, WITHOUT ROWID;
INSERT INTO journal VALUES(1,1,1,3,X'01a23264e87a752896edcf683f5912ad',1796141803642929,X'0e2bebee0c356b55a42391057827b5f2c8cb7cfc79ed01b7ae2618a9498ac1ea',X'b8d7aba50399f2459a8045b671d4b24e080dc5848df87f10b51f9189061c8f4e');
INSERT INTO journal VALUES(1,1,2,3,X'01a23264e88877519da4e9abd71e72e6',1796141803656004,X'd34443c29a930fe0341f1c7e3b856456f4261397c876b89703bb8a2879881350',X'14afdcd20e58502b6f8387b821975f7657f3110682015f9929211aeee9462123');
INSERT INTO journal VALUES(2,1,1,1,X'01a2322a3c7d71c2aff71b9be0ad2658',1767960000000000,X'11701e2940be8cecb57879b6c0e93602d2928e963559aaafa3f501ce9ca04463',X'd7127bc1a4ca476c2d95edf8dd437fb880137a9f61258029cffb916aa96d86cb');
INSERT INTO journal VALUES(2,1,2,2,X'01a2322a3c7d71c2aff71b9be0ad2658',1767960002200000,X'a92ca9c7a5fd5709a44b00eebfeccfb1923a89ae1591d83163c06387f907ee7d',X'c470aa0a379069227763e1a894d8c93bdea48fbf29516316c0cb9912b8abdde1');
INSERT INTO journal VALUES(2,1,3,1,X'01a2322a3c7d71c2aff71b9be0ad265b',1767960000000000,X'1765e459ffe583ab9da95108f070e9a2d86cf7995fd0f1185c26d95fc4273b80',X'67886da3c4a1c9d01a3d7b0d9a6da2e0eb64ba6509d5e4b3604d1bdc6ec73acf');
INSERT INTO journal VALUES(2,1,4,2,X'01a2322a3c7d71c2aff71b9be0ad265b',1767960002200000,X'89ae9380435c7f76928e3f5d92e580638731097e7f52929fb35f43d07e02b536',X'487310e575d7fb35e7c0a8f0ba4c568351de2c2b5c2550795a2914cbd1a875ff');
INSERT INTO journal VALUES(2,1,5,1,X'01a2322a3c7d71c2aff71b9be0ad265c',1767960000000000,X'520c07d208bd089642487970d594649f76df9c27f7c47358524fefcd9f519dab',X'5201603294da2c5b965691d39f99800408068d447eb08be8daad1a5abe6191d0');
INSERT INTO journal VALUES(2,1,6,2,X'01a2322a3c7d71c2aff71b9be0ad265c',1767960002200000,X'f44769537b1cd5968f86be839a3e4c3b957a571e9f4813b91113efe12fa8df28',X'49a19e56dfaf74b80abe962dcbf17c1dc52daf228363e468cb22daa18397b3cf');
INSERT INTO journal VALUES(2,1,7,1,X'01a2322a3c7d71c2aff71b9be0ad265d',1767960000000000,X'b85cd1c449f6ea977cb1d11bba50c3c0b4309fb8ee7f271230de2bac798112c8',X'ee72e56fd51ab6aa5b4227dc262758f3bb650da9de5df8b2a8fb1d32fa435d7a');
INSERT INTO journal VALUES(2,1,8,2,X'01a2322a3c7d71c2aff71b9be0ad265d',1767960002200000,X'34dfbe9f6e19f04d782e633dfa76657de90f2272914b4233d4659c84aa8a7edd',X'b9d8b769695a8c4b165e3364070b0e1acdca80e50d6ff397e4aadd07bcda0ede');
INSERT INTO journal VALUES(2,1,9,1,X'01a2322a3c7d71c2aff71b9be0ad265e',1767960000000000,X'8aaaeb92233f15c221f2ad4145f0ecf6705813b1131afccc0779bfe6029f73a7',X'971674d7806186c808e234f1cb38d8906300621a50e64d67b933d675addc69e4');
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
CREATE INDEX product_order_entered ON product_order(entered);
CREATE INDEX build_entered ON build(entered);
CREATE INDEX reel_entered ON reel(entered);
CREATE INDEX feed_entered ON feed(entered);
COMMIT;
