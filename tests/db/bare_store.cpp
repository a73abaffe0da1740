#include "tests/db/bare_store.hpp"

#include <chrono>
#include <set>

namespace jigwright::room {
namespace {

const std::set<std::string> of_trials = {"trial", "finding", "reading_blob", "journal"};

double now_s() {
  return std::chrono::duration<double>(std::chrono::steady_clock::now().time_since_epoch()).count();
}

}  // namespace

WalPages::WalPages(sqlite3* handle) {
  sqlite3_wal_hook(handle, committed, this);
}

int WalPages::committed(void* self, sqlite3* handle, const char* name, int pages) {
  auto& w = *static_cast<WalPages*>(self);
  w.total_ += pages > w.last_ ? pages - w.last_ : pages;  // fewer: the log began anew
  w.last_ = pages;
  if (pages >= 1000) sqlite3_wal_checkpoint_v2(handle, name, SQLITE_CHECKPOINT_PASSIVE, nullptr, nullptr);
  return SQLITE_OK;
}

BareStore::BareStore(const std::string& path, const std::string& from) {
  expect(sqlite3_open_v2(from.c_str(), &from_, SQLITE_OPEN_READONLY, nullptr), SQLITE_OK);
  expect(sqlite3_open(path.c_str(), &to_), SQLITE_OK);
  run("PRAGMA journal_mode = WAL; PRAGMA synchronous = FULL; BEGIN");
  std::vector<std::string> tables;
  for (const Row& row : rows("SELECT type, name, sql FROM sqlite_schema WHERE type IN ('table', 'index') AND sql NOT "
                             "NULL ORDER BY type = 'index'")) {
    run(reinterpret_cast<const char*>(sqlite3_value_text(row[2].get())));
    if (*sqlite3_value_text(row[0].get()) != 't') continue;
    const std::string name = reinterpret_cast<const char*>(sqlite3_value_text(row[1].get()));
    if (of_trials.count(name) == 0) copy_table(name);
    if (name == "journal") journal_ = true;
  }
  run("COMMIT; PRAGMA wal_checkpoint(TRUNCATE); CREATE TABLE tick(n)");
  insert_trial_ =
      prepare(to_,
              "INSERT INTO trial(id, uuid, board, ord, station, nest, at_us, state, judgement, void_reason, "
              "origin, attempt, counts, setup, revision, operator, depth, mark) "
              "VALUES(?, ?, ?, ?, ?, ?, ?, 0, 2, 'open', ?, ?, ?, ?, ?, ?, ?, zeroblob(32))");
  end_trial_ =
      prepare(to_,
              "UPDATE trial SET state = 1, mark = NULL, took_ms = ?, judgement = ?, void_reason = ?, applied = ?, "
              "equipment = ?, reduction = ?, ambient_degC = ?, unsafe = ?, nogo = ?, deciding_metric = ?, "
              "worst_metric = ?, worst_margin = ? WHERE id = ?");
  insert_finding_ = prepare(to_, "INSERT INTO finding VALUES(?, ?, ?, ?, ?, ?, ?)");
  insert_readings_ = prepare(to_, "INSERT INTO reading_blob VALUES(?, ?, ?, ?)");
  if (journal_) insert_journal_ = prepare(to_, "INSERT INTO journal VALUES(?, ?, ?, ?, ?, ?, ?, ?)");
}

BareStore::~BareStore() {
  for (sqlite3_stmt* s : {insert_trial_, end_trial_, insert_finding_, insert_readings_, insert_journal_})
    sqlite3_finalize(s);
  sqlite3_close(to_);
  sqlite3_close(from_);
}

void BareStore::copy_table(const std::string& name) {
  const std::vector<Row> all = rows("SELECT * FROM " + name);
  if (all.empty()) return;
  std::string marks = "?";
  for (std::size_t i = 1; i < all[0].size(); ++i) marks += ", ?";
  sqlite3_stmt* statement = prepare(to_, "INSERT INTO " + name + " VALUES(" + marks + ")");
  for (const Row& row : all) insert(statement, row);
  sqlite3_finalize(statement);
}

void BareStore::load(std::int64_t first, std::int64_t last) {
  trials_.clear();
  for (std::int64_t id = first; id <= last; ++id) {
    const std::string at = std::to_string(id);
    Trial trial;
    trial.begun = std::move(rows("SELECT id, uuid, board, ord, station, nest, at_us, origin, attempt, counts, setup, "
                                 "revision, operator, depth FROM trial WHERE id = " +
                                 at)
                                .at(0));
    trial.ended =
        std::move(rows("SELECT took_ms, judgement, void_reason, applied, equipment, reduction, ambient_degC, "
                       "unsafe, nogo, deciding_metric, worst_metric, worst_margin, id FROM trial WHERE id = " +
                       at)
                      .at(0));
    trial.findings = rows("SELECT * FROM finding WHERE trial = " + at + " ORDER BY metric");
    trial.readings = rows("SELECT * FROM reading_blob WHERE trial = " + at);
    trials_.push_back(std::move(trial));
  }
  if (!journal_ || trials_.empty()) return;
  // A record a trial, in the order of the trials, after those that the lists made.
  auto all = rows("SELECT * FROM journal WHERE kind = 4 ORDER BY station, epoch, seq LIMIT " +
                  std::to_string(trials_.size()) + " OFFSET " + std::to_string(first - 1));
  for (std::size_t i = 0; i < all.size(); ++i) trials_[i].journal.push_back(std::move(all[i]));
}

double BareStore::log() {
  const double began_s = now_s();
  for (const Trial& trial : trials_) {
    run("BEGIN IMMEDIATE");
    insert(insert_trial_, trial.begun);
    run("COMMIT");
    run("BEGIN IMMEDIATE");
    insert(end_trial_, trial.ended);
    for (const Row& row : trial.findings) insert(insert_finding_, row);
    for (const Row& row : trial.readings) insert(insert_readings_, row);
    if (journal_) insert(insert_journal_, trial.journal.at(0));
    run("COMMIT");
  }
  return now_s() - began_s;
}

double BareStore::bare_commits_s(int count) {
  run("INSERT INTO tick VALUES(0)");
  const double began_s = now_s();
  for (int i = 0; i < count; ++i) run("UPDATE tick SET n = n + 1");
  return now_s() - began_s;
}

std::vector<BareStore::Row> BareStore::rows(const std::string& sql) {
  std::vector<Row> out;
  sqlite3_stmt* statement = prepare(from_, sql);
  while (sqlite3_step(statement) == SQLITE_ROW) {
    Row row;
    for (int i = 0; i < sqlite3_column_count(statement); ++i)
      row.emplace_back(sqlite3_value_dup(sqlite3_column_value(statement, i)), sqlite3_value_free);
    out.push_back(std::move(row));
  }
  sqlite3_finalize(statement);
  return out;
}

sqlite3_stmt* BareStore::prepare(sqlite3* handle, const std::string& sql) {
  sqlite3_stmt* out = nullptr;
  expect(sqlite3_prepare_v2(handle, sql.c_str(), -1, &out, nullptr), SQLITE_OK);
  return out;
}

void BareStore::insert(sqlite3_stmt* statement, const Row& row) {
  for (std::size_t i = 0; i < row.size(); ++i) sqlite3_bind_value(statement, static_cast<int>(i) + 1, row[i].get());
  expect(sqlite3_step(statement), SQLITE_DONE);
  sqlite3_reset(statement);
}

void BareStore::run(const char* sql) {
  expect(sqlite3_exec(to_, sql, nullptr, nullptr, nullptr), SQLITE_OK);
}

void BareStore::expect(int code, int wanted) {
  sound_ = sound_ && code == wanted;
}

}  // namespace jigwright::room
