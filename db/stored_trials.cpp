#include "db/stored_trials.hpp"

#include "db/sqlite.hpp"

namespace jigwright {
namespace {

std::vector<StoredTrial> heads(Database& database, std::int64_t after, int most) {
  std::vector<StoredTrial> out;
  Query q = database.query(
      "SELECT t.id, b.serial, t.attempt, t.judgement, t.void_reason, t.unsafe, t.setup, r.format, r.body "
      "FROM trial t JOIN board b ON b.id = t.board LEFT JOIN reading_blob r ON r.trial = t.id "
      "WHERE t.id > ? AND t.state = 1 ORDER BY t.id LIMIT ?",
      after, most);
  while (q.next()) {
    StoredTrial t;
    t.id = q.integer(0);
    t.serial = q.text(1);
    t.attempt = static_cast<int>(q.integer(2));
    t.judgement = static_cast<Judgement>(q.integer(3));
    t.void_reason = q.text(4);
    t.unsafe = q.text(5);
    t.setup = q.integer(6);
    t.readings_format = q.null(8) ? 0 : static_cast<int>(q.integer(7));
    t.readings = q.text(8);
    out.push_back(std::move(t));
  }
  return out;
}

void add_findings(Database& database, StoredTrial& trial) {
  Query q = database.query(
      "SELECT m.step, m.name, m.variant, x.value, x.u, x.n, x.state, x.verdict FROM finding x "
      "JOIN metric m ON m.id = x.metric WHERE x.trial = ? ORDER BY x.metric",
      trial.id);
  while (q.next()) {
    StoredFinding f;
    f.name = {q.text(0), q.text(1), q.text(2)};
    f.judged.finding.value = q.real(3);
    f.judged.finding.u = q.real(4);
    f.judged.finding.n = static_cast<int>(q.integer(5));
    f.judged.finding.state = static_cast<FindingState>(q.integer(6));
    f.judged.verdict = static_cast<Verdict>(q.integer(7));
    trial.findings.push_back(std::move(f));
  }
}

void add_versions(Database& database, StoredTrial& trial) {
  Query q = database.query(
      "SELECT s.kind, s.version FROM trial t JOIN reduction_step s ON s.reduction = t.reduction WHERE t.id = ?",
      trial.id);
  while (q.next()) trial.reduce_versions.emplace_back(q.text(0), static_cast<int>(q.integer(1)));
}

}  // namespace

Result<std::vector<StoredTrial>> stored_trials(Database& database, std::int64_t after, int most) {
  Transaction reading(database, Transaction::Kind::read);
  std::vector<StoredTrial> out = heads(database, after, most);
  for (StoredTrial& t : out) {
    add_findings(database, t);
    add_versions(database, t);
  }
  if (const auto done = reading.commit(); !done) return done.error();
  return out;
}

Result<std::vector<Document>> documents_of_setup(Database& database, std::int64_t setup) {
  Transaction reading(database, Transaction::Kind::read);
  std::vector<Document> out;
  {
    Query q = database.query(
        "SELECT d.kind, d.name, d.body FROM setup_document s JOIN document d ON d.id = s.document WHERE s.setup = ?",
        setup);
    while (q.next()) out.push_back({q.text(0), q.text(1), q.text(2)});
  }
  if (const auto done = reading.commit(); !done) return done.error();
  return out;
}

}  // namespace jigwright
