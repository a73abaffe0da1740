#include "db/trial_writer.hpp"

#include <algorithm>
#include <cmath>

#include "db/counts.hpp"
#include "db/digest.hpp"
#include "db/journal.hpp"
#include "db/revisions.hpp"

namespace jigwright {
namespace {

/// Newest trials among which one that was cut short is looked for: no more, so that a start is quick in a large store.
constexpr std::int64_t looked_through = 100'000;
constexpr const char* killed = "the program ended in mid-trial";

std::vector<std::pair<Metric, Limit>> limited(const std::vector<FindingRow>& rows) {
  std::vector<std::pair<Metric, Limit>> out;
  for (const FindingRow& row : rows)
    if (row.limit) out.emplace_back(row.metric, *row.limit);
  return out;
}

const char* origin_word(std::int64_t origin) {
  return origin == static_cast<int>(Origin::measured)    ? "measured"
         : origin == static_cast<int>(Origin::simulated) ? "simulated"
                                                         : "taken";
}

std::optional<std::string> unless_empty(const std::string& text) {
  return text.empty() ? std::nullopt : std::optional(text);
}

bool same(const std::vector<Document>& a, const std::vector<Document>& b) {
  return std::equal(a.begin(), a.end(), b.begin(), b.end(),
                    [](const Document& x, const Document& y) { return x.kind == y.kind && x.text == y.text; });
}

bool same(double a, double b) {
  return a == b || (std::isnan(a) && std::isnan(b));
}

bool same(const Bounds& a, const Bounds& b) {
  return a.low == b.low && a.high == b.high;
}

bool same(const std::optional<Limit>& a, const std::optional<Limit>& b) {
  if (!a || !b) return a.has_value() == b.has_value();
  return same(a->specification, b->specification) && same(a->nominal, b->nominal) && a->guard == b->guard &&
         same(a->share, b->share) && same(a->budget_U, b->budget_U) &&
         same(a->budget_of_reading, b->budget_of_reading) && same(a->width, b->width) && same(a->applied, b->applied) &&
         a->reason == b->reason;
}

}  // namespace

Result<OpenTrial> TrialWriter::begin(const TrialStart& start) {
  Transaction transaction(db_, Transaction::Kind::write);
  check_origin(start);
  OpenTrial open;
  open.uuid = uuids_.next(start.at_us / 1000);
  settle_setup(start);
  TrialStart with = start;
  with.adopted = adopted(start);
  insert_open(with, open);
  mark(open);
  open.adopted = with.adopted;
  const auto done = transaction.commit();
  if (done) return open;
  forget();
  return done.error();
}

std::optional<std::int64_t> TrialWriter::adopted(const TrialStart& start) {
  if (!db_.first("SELECT 1 FROM act WHERE kind = 'adopt' LIMIT 1")) return std::nullopt;
  const auto in_force = adopted_for(db_, start.order);
  if (!in_force) return std::nullopt;
  RevisionFiles files;
  for (const Document& d : start.documents) {
    if (d.kind == "plan") files.plan = d.text;
    if (d.kind == "jig") files.jig = d.text;
    if (d.kind == "limits") files.limits = d.text;
  }
  return differing(*in_force, files).empty() ? in_force->number : 0;
}

void TrialWriter::check_origin(const TrialStart& start) {
  if (start.origin == Origin::taken) return;
  const auto origin = static_cast<std::int64_t>(start.origin);
  const auto held = db_.first("SELECT value FROM meta WHERE key = 'origin'");
  if (!held) return db_.run("INSERT INTO meta VALUES('origin', ?)", origin);
  if (*held == origin) return;
  db_.fail({Error::Kind::store,
            std::string("this store holds ") + origin_word(*held) + " trials, and this trial is " +
                origin_word(origin) + ": the two don't share a store",
            db_.path(), "name another store for it"});
}

TrialWriter::Id TrialWriter::board(const std::string& serial) {
  if (const auto id = db_.first("SELECT id FROM board WHERE serial = ?", serial)) return *id;
  db_.run("INSERT INTO board(serial) VALUES(?)", serial);
  return db_.last_id();
}

TrialWriter::Id TrialWriter::order(const std::string& name) {
  if (const auto id = db_.first("SELECT id FROM product_order WHERE name = ?", name)) return *id;
  db_.run("INSERT INTO product_order(name) VALUES(?)", name);
  return db_.last_id();
}

TrialWriter::Id TrialWriter::person(const std::string& name) {
  if (const auto id = db_.first("SELECT id FROM person WHERE name = ?", name)) return *id;
  db_.run("INSERT INTO person(name) VALUES(?)", name);
  return db_.last_id();
}

void TrialWriter::settle_setup(const TrialStart& start) {
  if (setup_ && setup_->plan == start.plan && setup_->program == start.program &&
      setup_->limit_set == start.limit_set && setup_->number == start.limit_revision &&
      same(setup_->documents, start.documents))
    return;
  std::vector<Id> ids;
  std::optional<Id> limits;
  for (const Document& d : start.documents) {
    ids.push_back(document(d));
    if (d.kind == "limits") limits = ids.back();
  }
  setup_ = Setup{start.plan,      start.program,     start.limit_set,        start.limit_revision,
                 start.documents, setup(start, ids), revision(start, limits)};
}

TrialWriter::Id TrialWriter::document(const Document& d) {
  const std::string digest = sha256(d.text);
  if (const auto id = db_.first("SELECT id FROM document WHERE sha256 = ?", Blob{digest})) return *id;
  db_.run("INSERT INTO document(sha256, kind, name, body) VALUES(?, ?, ?, ?)", Blob{digest}, d.kind, d.name, d.text);
  return db_.last_id();
}

TrialWriter::Id TrialWriter::setup(const TrialStart& start, const std::vector<Id>& documents) {
  const std::string digest = bodies_.setup_part(start.plan, start.program, documents).sha256;
  if (const auto id = db_.first("SELECT id FROM setup WHERE sha256 = ?", Blob{digest})) return *id;
  db_.run("INSERT INTO setup(sha256, plan, program) VALUES(?, ?, ?)", Blob{digest}, start.plan, start.program);
  const Id made = db_.last_id();
  for (Id id : documents) db_.run("INSERT OR IGNORE INTO setup_document VALUES(?, ?)", made, id);
  return made;
}

TrialWriter::Id TrialWriter::revision(const TrialStart& start, std::optional<Id> document) {
  if (const auto id = db_.first("SELECT id FROM revision WHERE limit_set = ? AND number = ? AND document IS ?",
                                start.limit_set, start.limit_revision, document))
    return *id;
  const Uuid uuid = uuids_.next(start.at_us / 1000);
  db_.run("INSERT INTO revision(uuid, limit_set, number, document) VALUES(?, ?, ?, ?)", Blob{bytes(uuid)},
          start.limit_set, start.limit_revision, document);
  return db_.last_id();
}

void TrialWriter::insert_open(const TrialStart& start, OpenTrial& open, int attempt) {
  const Id on = board(start.serial);
  const Id at = station_row(db_, uuids_, start.station, start.at_us);
  std::optional<Id> ord, who;
  if (!start.order.empty()) ord = order(start.order);
  if (!start.operator_name.empty()) who = person(start.operator_name);
  open.attempt = attempt;
  if (attempt == 0)
    open.attempt = static_cast<int>(db_.first("SELECT max(attempt) FROM trial WHERE board = ?", on).value_or(0)) + 1;
  db_.run(
      "INSERT INTO trial(uuid, board, ord, station, nest, at_us, state, judgement, void_reason, origin, attempt, "
      "counts, setup, revision, operator, depth, purpose, adopted) VALUES(?, ?, ?, ?, ?, ?, 0, 2, ?, ?, ?, 0, ?, ?, ?, "
      "?, ?, ?)",
      Blob{bytes(open.uuid)}, on, ord, at, start.nest, start.at_us, killed, static_cast<int>(start.origin),
      open.attempt, setup_ ? setup_->setup : 0, setup_ ? setup_->revision : 0, who, start.depth,
      static_cast<int>(start.purpose), start.adopted);
  open.id = db_.last_id();
  settle_counts(db_, on);
}

Result<Done> TrialWriter::finish(const OpenTrial& open, const TrialEnd& end) {
  Transaction transaction(db_, Transaction::Kind::write);
  std::vector<Id> metrics;
  for (const FindingRow& row : end.findings) metrics.push_back(metric(row.metric));
  Tally tally;
  for (std::size_t i = 0; i < metrics.size(); ++i) {
    const Judged& judged = end.findings[i].judged;
    if (judged.verdict == Verdict::missed) ++tally.missed;
    if (static_cast<int>(i) == end.outcome.deciding) tally.deciding = metrics[i];
    if (!(judged.margin < tally.worst_margin.value_or(std::numeric_limits<double>::infinity()))) continue;
    tally.worst = metrics[i];
    tally.worst_margin = judged.margin;
  }
  std::vector<Bodies::Row> findings = write_end(open, end, tally, metrics);
  db_.run("INSERT INTO reading_blob(trial, format, body) VALUES(?, ?, ?)", open.id, end.readings_format,
          Blob{end.readings});
  journal(open, end, std::move(findings));
  const auto done = transaction.commit();
  if (!done) forget();
  return done;
}

std::vector<Bodies::Row> TrialWriter::write_end(const OpenTrial& open, const TrialEnd& end, const Tally& tally,
                                                const std::vector<Id>& metrics) {
  close(open, end, tally, applied(end.findings, metrics));
  std::vector<Bodies::Row> findings = insert_findings(open, end.findings, metrics);
  settle_counts(db_, db_.first("SELECT board FROM trial WHERE id = ?", open.id).value_or(0));
  return findings;
}

/// Rows that a trial names by a uuid, as they were.
void TrialWriter::settle_copied(const TrialCopy& copy) {
  std::optional<Id> limits;
  for (const Document& d : copy.start.documents) {
    const Id id = document(d);
    if (copy.revision_document && sha256(d.text) == *copy.revision_document) limits = id;
  }
  const auto held = db_.first("SELECT id FROM revision WHERE uuid = ?", Blob{copy.revision_uuid});
  if (!held)
    db_.run("INSERT INTO revision(uuid, limit_set, number, document) VALUES(?, ?, ?, ?)", Blob{copy.revision_uuid},
            copy.start.limit_set, copy.start.limit_revision, limits);
}

void TrialWriter::replay_begin(const TrialCopy& copy) {
  check_origin(copy.start);
  settle_copied(copy);
  settle_setup(copy.start);
  setup_->revision = db_.first("SELECT id FROM revision WHERE uuid = ?", Blob{copy.revision_uuid}).value_or(0);
  OpenTrial open;
  open.uuid = copy.uuid;
  insert_open(copy.start, open, copy.attempt);
  setup_.reset();  // a later trial may name another revision of the same content
  mark(open);
}

void TrialWriter::replay(const TrialCopy& copy) {
  if (!db_.first("SELECT id FROM trial WHERE uuid = ? AND state = 0", Blob{bytes(copy.uuid)})) replay_begin(copy);
  OpenTrial open;
  open.uuid = copy.uuid;
  open.attempt = copy.attempt;
  open.id = db_.first("SELECT id FROM trial WHERE uuid = ? AND state = 0", Blob{bytes(copy.uuid)}).value_or(0);
  if (copy.state == TrialState::cut_short) db_.run("UPDATE trial SET state = 2, mark = NULL WHERE id = ?", open.id);
  std::vector<Bodies::Row> findings;
  if (copy.state == TrialState::ended) {
    std::vector<Id> metrics;
    for (const FindingRow& row : copy.end.findings) metrics.push_back(metric(row.metric));
    Tally tally;
    tally.missed = copy.missed;
    if (copy.end.outcome.deciding >= 0) tally.deciding = metrics[static_cast<std::size_t>(copy.end.outcome.deciding)];
    if (copy.worst >= 0) tally.worst = metrics[static_cast<std::size_t>(copy.worst)];
    tally.worst_margin = copy.worst_margin;
    findings = write_end(open, copy.end, tally, metrics);
  }
  if (!copy.archived_sha256.empty())
    db_.run("INSERT INTO reading_blob(trial, format, sha256) VALUES(?, ?, ?)", open.id, copy.end.readings_format,
            Blob{copy.archived_sha256});
  else if (copy.end.readings_format != 0)
    db_.run("INSERT INTO reading_blob(trial, format, body) VALUES(?, ?, ?)", open.id, copy.end.readings_format,
            Blob{copy.end.readings});
  journal(open, copy.end, std::move(findings));
}

void TrialWriter::close(const OpenTrial& open, const TrialEnd& end, const Tally& tally, Id applied) {
  const Outcome& outcome = end.outcome;
  const Id with = equipment(end.instruments);
  const Id reduced = reduction(end.reduce_versions);
  const auto reason = outcome.judgement == Judgement::void_ ? unless_empty(outcome.void_reason) : std::nullopt;
  db_.run(
      "UPDATE trial SET state = 1, mark = NULL, took_ms = ?, judgement = ?, void_reason = ?, applied = ?, equipment = "
      "?, "
      "reduction = ?, ambient_degC = ?, unsafe = ?, nogo = ?, deciding_metric = ?, worst_metric = ?, "
      "worst_margin = ? WHERE id = ? AND uuid = ? AND state = 0",
      end.took_ms, static_cast<int>(outcome.judgement), reason, applied, with, reduced, end.ambient_C,
      unless_empty(end.safe_state), tally.missed, tally.deciding, tally.worst, tally.worst_margin, open.id,
      Blob{bytes(open.uuid)});
  if (!db_.failed() && db_.changes() != 1)
    db_.fail({Error::Kind::store, "trial " + text(open.uuid) + " is not open in this store", db_.path(),
              "a trial is ended once, in the store where it began"});
}

std::vector<Bodies::Row> TrialWriter::insert_findings(const OpenTrial& open, const std::vector<FindingRow>& rows,
                                                      const std::vector<Id>& metrics) {
  std::vector<Bodies::Row> out;
  for (std::size_t i = 0; i < rows.size(); ++i) {
    const Finding& f = rows[i].judged.finding;
    out.push_back({metrics[i], f.value, f.u, f.n, static_cast<int>(f.state), static_cast<int>(rows[i].judged.verdict)});
  }
  // In the key's order, so that the table grows at its right edge.
  std::sort(out.begin(), out.end(), [](const auto& a, const auto& b) { return a.metric < b.metric; });
  for (const Bodies::Row& row : out)
    db_.run("INSERT INTO finding VALUES(?, ?, ?, ?, ?, ?, ?)", open.id, row.metric, row.value, row.u, row.n, row.state,
            row.verdict);
  return out;
}

TrialWriter::Id TrialWriter::metric(const Metric& m) {
  const auto about = static_cast<int>(m.about);
  const auto key = std::tuple(m.name.step, m.name.name, m.name.variant, static_cast<int>(m.unit), about);
  if (const auto found = metrics_.find(key); found != metrics_.end()) return found->second;
  auto id = db_.first("SELECT id FROM metric WHERE step = ? AND name = ? AND variant = ? AND unit = ? AND about = ?",
                      m.name.step, m.name.name, m.name.variant, symbol(m.unit), about);
  if (!id) {
    db_.run("INSERT INTO metric(step, name, variant, unit, about) VALUES(?, ?, ?, ?, ?)", m.name.step, m.name.name,
            m.name.variant, symbol(m.unit), about);
    id = db_.last_id();
  }
  if (!db_.failed()) metrics_.emplace(key, *id);
  return *id;
}

/// Most trials are judged by the limits of the one before: no need to hash them again.
TrialWriter::Id TrialWriter::applied(const std::vector<FindingRow>& rows, const std::vector<Id>& metrics) {
  const bool again = last_applied_ && last_applied_->metrics == metrics &&
                     std::equal(rows.begin(), rows.end(), last_applied_->limits.begin(), last_applied_->limits.end(),
                                [](const FindingRow& row, const auto& limit) { return same(row.limit, limit); });
  if (again) return last_applied_->id;
  const Id id = settle_applied(rows, metrics);
  last_applied_.reset();
  if (db_.failed()) return id;
  last_applied_.emplace(Applied{metrics, {}, id});
  for (const FindingRow& row : rows) last_applied_->limits.push_back(row.limit);
  return id;
}

TrialWriter::Id TrialWriter::settle_applied(const std::vector<FindingRow>& rows, const std::vector<Id>& metrics) {
  const std::string digest = limits_part(limited(rows)).sha256;
  if (const auto found = applied_.find(digest); found != applied_.end()) return found->second;
  auto id = db_.first("SELECT id FROM applied WHERE sha256 = ?", Blob{digest});
  if (!id) {
    db_.run("INSERT INTO applied(sha256) VALUES(?)", Blob{digest});
    id = db_.last_id();
    for (std::size_t i = 0; i < rows.size(); ++i)
      if (rows[i].limit) insert_applied_limit(*id, metrics[i], *rows[i].limit);
  }
  if (!db_.failed()) applied_.emplace(digest, *id);
  return *id;
}

void TrialWriter::insert_applied_limit(Id applied, Id metric, const Limit& l) {
  db_.run("INSERT INTO applied_limit VALUES(?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)", applied, metric,
          l.specification.low, l.specification.high, l.nominal, static_cast<int>(l.guard), l.share, l.budget_U,
          l.budget_of_reading, l.width, l.applied.low, l.applied.high, unless_empty(l.reason));
}

TrialWriter::Id TrialWriter::equipment(const std::vector<InstrumentIdentity>& instruments) {
  const std::string digest = instruments_part(instruments).sha256;
  if (const auto found = equipment_.find(digest); found != equipment_.end()) return found->second;
  auto id = db_.first("SELECT id FROM equipment WHERE sha256 = ?", Blob{digest});
  if (!id) {
    db_.run("INSERT INTO equipment(sha256) VALUES(?)", Blob{digest});
    id = db_.last_id();
    for (const InstrumentIdentity& i : instruments)
      db_.run("INSERT OR IGNORE INTO equipment_instrument VALUES(?, ?)", *id, instrument(i));
  }
  if (!db_.failed()) equipment_.emplace(digest, *id);
  return *id;
}

TrialWriter::Id TrialWriter::instrument(const InstrumentIdentity& i) {
  if (const auto id = db_.first(
          "SELECT id FROM instrument WHERE instrument = ? AND maker = ? AND model = ? AND serial = ? AND firmware = ?",
          i.instrument, i.maker, i.model, i.serial, i.firmware))
    return *id;
  db_.run("INSERT INTO instrument(instrument, maker, model, serial, firmware) VALUES(?, ?, ?, ?, ?)", i.instrument,
          i.maker, i.model, i.serial, i.firmware);
  return db_.last_id();
}

TrialWriter::Id TrialWriter::reduction(const std::vector<std::pair<std::string, int>>& versions) {
  const std::string digest = versions_part(versions).sha256;
  if (const auto found = reduction_.find(digest); found != reduction_.end()) return found->second;
  auto id = db_.first("SELECT id FROM reduction WHERE sha256 = ?", Blob{digest});
  if (!id) {
    db_.run("INSERT INTO reduction(sha256) VALUES(?)", Blob{digest});
    id = db_.last_id();
    for (const auto& [kind, version] : versions)
      db_.run("INSERT OR IGNORE INTO reduction_step VALUES(?, ?, ?)", *id, kind, version);
  }
  if (!db_.failed()) reduction_.emplace(digest, *id);
  return *id;
}

/// The row's own hash, until a record covers it.
void TrialWriter::mark(const OpenTrial& open) {
  const auto body = bodies_.trial(bytes(open.uuid), std::vector<Bodies::Row>());
  if (body && !db_.failed()) db_.run("UPDATE trial SET mark = ? WHERE id = ?", Blob{body->sha256}, open.id);
}

/// Stamped by the clock at the trial's end; without one, by its begin and what it took.
void TrialWriter::journal(const OpenTrial& open, const TrialEnd& end, std::vector<Bodies::Row> findings) {
  const auto body = bodies_.trial(bytes(open.uuid), std::move(findings));
  if (!body || db_.failed()) return;
  std::int64_t at_us = end.at_us;
  if (at_us == 0) at_us = db_.first("SELECT at_us FROM trial WHERE id = ?", open.id).value_or(0) + end.took_ms * 1000;
  append_record(db_, body->station, RecordKind::trial, bytes(open.uuid), at_us, body->sha256);
}

Result<int> TrialWriter::close_cut_short(const std::string& station, std::int64_t at_us) {
  Transaction transaction(db_, Transaction::Kind::write);
  std::vector<std::pair<Id, std::string>> open;
  {
    Query q = db_.query(
        "SELECT t.id, t.uuid FROM trial t CROSS JOIN station s ON s.id = t.station WHERE t.state = 0 AND s.name = ? "
        "AND t.id > (SELECT max(id) FROM trial) - ? ORDER BY t.id",
        station, looked_through);
    while (q.next()) open.emplace_back(q.integer(0), q.text(1));
  }
  for (const auto& [id, uuid] : open) {
    db_.run("UPDATE trial SET state = 2, mark = NULL WHERE id = ?", id);
    if (const auto body = bodies_.trial(uuid, std::vector<Bodies::Row>()); body && !db_.failed())
      append_record(db_, body->station, RecordKind::trial, uuid, at_us, body->sha256);
  }
  const auto done = transaction.commit();
  if (done) return static_cast<int>(open.size());
  forget();
  return done.error();
}

void TrialWriter::forget() {
  bodies_.forget();
  setup_.reset();
  last_applied_.reset();
  metrics_.clear();
  applied_.clear();
  equipment_.clear();
  reduction_.clear();
}

}  // namespace jigwright
