#include "tests/db/record_check.hpp"

#include <cstdlib>

#include "db/audit.hpp"
#include "db/sqlite.hpp"

namespace jigwright::room {
namespace {

/// What is wrong with an ended trial beside the trial that was handed in; empty if nothing.
std::string differs(Database& db, std::int64_t trial, const TrialEnd& end) {
  std::map<std::pair<std::string, std::string>, const FindingRow*> expected;
  for (const FindingRow& row : end.findings) expected[{row.metric.name.step, row.metric.name.variant}] = &row;
  std::size_t found = 0;
  Query q = db.query(
      "SELECT m.step, m.variant, x.value, x.verdict, x.n FROM finding x JOIN metric m ON m.id = x.metric "
      "WHERE x.trial = ?",
      trial);
  for (; q.next(); ++found) {
    const auto at = expected.find({q.text(0), q.text(1)});
    if (at == expected.end()) return "a finding that was never handed in";
    const Judged& judged = at->second->judged;
    if (q.real(2) != judged.finding.value || q.integer(3) != static_cast<int>(judged.verdict) ||
        q.integer(4) != judged.finding.n)
      return "a finding differs";
  }
  if (found != end.findings.size()) return "findings are missing";
  Query readings = db.query("SELECT body FROM reading_blob WHERE trial = ?", trial);
  if (!readings.next() || readings.text(0) != end.readings) return "the readings differ";
  return {};
}

void check_trials(Database& db, const Factory& factory, Held& out) {
  Query q = db.query(
      "SELECT t.id, t.uuid, t.state, t.judgement, t.took_ms, b.serial, t.applied IS NOT NULL FROM trial t "
      "JOIN board b ON b.id = t.board");
  while (q.next()) {
    const auto uuid = uuid_from_bytes(q.text(1));
    const bool open = q.integer(2) != 1;  // under way, or cut short by a cut of the power
    out.trials[uuid ? text(*uuid) : "?"] = open ? Kept::open : Kept::whole;
    std::string wrong;
    if (open) {
      const bool empty = q.integer(3) == 2 && q.null(4) && q.integer(6) == 0;
      if (!empty) wrong = "an open trial has an end";
    } else {
      const TrialEnd end = factory.end(std::atoll(q.text(5).substr(3).c_str()) - 1);
      wrong = differs(db, q.integer(0), end);
      if (q.integer(3) != static_cast<int>(end.outcome.judgement)) wrong = "the judgement differs";
    }
    if (!wrong.empty()) out.complaints += q.text(5) + ": " + wrong + "\n";
  }
}

void check_none(Database& db, Sql count, const char* complaint, Held& out) {
  if (db.first(count).value_or(1) != 0) out.complaints += std::string(complaint) + "\n";
}

void check_chain(Database& db, Held& out) {
  const auto report = audit(db);
  if (!report) {
    out.complaints += describe(report.error()) + "\n";
    return;
  }
  for (const Difference& d : report.value().differences)
    out.complaints += "audit: " + d.what + ", " + d.record + " " + d.on + "\n";
}

/// All but the chain, in one reading transaction.
void check_rows(Database& db, const Factory& factory, Held& out) {
  Transaction reading(db, Transaction::Kind::read);
  check_trials(db, factory, out);
  check_none(db, "SELECT count(*) FROM finding WHERE trial NOT IN (SELECT id FROM trial WHERE state = 1)",
             "findings without an ended trial", out);
  check_none(db, "SELECT count(*) FROM reading_blob WHERE trial NOT IN (SELECT id FROM trial WHERE state = 1)",
             "readings without an ended trial", out);
  check_none(db, "SELECT count(*) FROM (SELECT sum(counts) AS n FROM trial GROUP BY board) WHERE n <> 1",
             "a board without its one speaking trial", out);
  check_none(db, "SELECT count(*) FROM pragma_foreign_key_check", "a row names another that is not there", out);
  Query integrity = db.query("PRAGMA integrity_check");
  while (integrity.next())
    if (integrity.text(0) != "ok") out.complaints += integrity.text(0) + "\n";
  if (db.failed()) out.complaints += describe(db.error()) + "\n";
}

}  // namespace

Held held(Store& store, const Factory& factory, bool audited) {
  Held out;
  check_rows(store.database(), factory, out);
  if (audited) check_chain(store.database(), out);
  return out;
}

}  // namespace jigwright::room
