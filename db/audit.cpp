#include "db/audit.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <limits>
#include <map>
#include <set>
#include <unordered_set>
#include <utility>

#include "db/bodies.hpp"
#include "db/columns.hpp"
#include "db/digest.hpp"
#include "db/journal.hpp"
#include "db/people.hpp"
#include "db/schema.hpp"
#include "db/speaks.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

using Id = std::int64_t;

class Audit {
 public:
  explicit Audit(Database& database) : db_(database), bodies_(database) {}
  AuditReport run();
  AuditReport run_recent(const std::string& station, std::int64_t last);

 private:
  struct Link {
    std::string station, uuid;  ///< of the station
    JournalRow row;
    std::string hash;
  };
  void differs(std::string what) { add({std::move(what), {}, {}, {}, 0, 0}); }
  void differs(std::string what, const Link& at, std::string on);
  void add(Difference difference);

  void check_file();
  void check_schema();
  void check_documents();
  void check_chains();
  void check_chain(Id station, const std::string& name, const std::string& uuid);
  void check_silent(Id station, const std::string& name);
  static Link link_of(const Query& q, const std::string& station, const std::string& uuid);
  /// @return whether an epoch begins with it
  bool check_hash(const Link& link, const Link* before);
  void check_link(const Link& link, const Link* before, Id station);
  void check_begins(const Link& link, const Link* before);
  void check_body(const Link& link, Id station);
  void check_trial(const Link& link, Id station);
  void check_entered(const Link& link);
  void check_epoch(const Link& link);
  void check_archived(const Link& link);
  void check_act(const Link& link, Id station);
  void check_open(const std::string& serial, const std::string& uuid);
  void check_trials();
  void check_board(const std::string& serial, const std::vector<PastTrial>& trials, const std::vector<Id>& counts);
  void check_counts();
  void count(Sql held, std::int64_t recorded, const char* what);
  void none(Sql first, const char* what);
  void check_people();
  void check_meta();

  Database& db_;
  Bodies bodies_;
  AuditReport report_;
  std::unordered_set<Id> trials_;  ///< with a record
  std::map<std::string, Id> entry_ids_;
  std::map<Id, Bodies::Entry> entries_;
  std::map<Id, Sha256> entry_hashes_;
  std::set<Id> entries_seen_;
  bool unreadable_{false};
  std::int64_t readings_{0}, epochs_{0}, archives_{0}, orders_{0}, builds_{0}, reels_{0}, feeds_{0}, dropped_{0};
};

/// Once the store can't be read any further, what is missing is no news.
void Audit::add(Difference difference) {
  if (db_.failed() && unreadable_) return;
  unreadable_ = db_.failed();
  if (unreadable_) difference = {"the store could not be read to its end: " + db_.error().what, {}, {}, {}, 0, 0};
  ++report_.found;
  if (report_.differences.size() < AuditReport::most_listed) report_.differences.push_back(std::move(difference));
}

void Audit::differs(std::string what, const Link& at, std::string on) {
  add({std::move(what), record_word(at.row.kind), std::move(on), at.station, at.row.epoch, at.row.seq});
}

AuditReport Audit::run() {
  check_file();
  check_schema();
  check_documents();
  check_chains();
  check_trials();
  check_counts();
  check_meta();
  check_blocks(db_, [this](std::string what) { differs(std::move(what)); });
  if (db_.failed()) differs({});
  return std::move(report_);
}

/// Links and trials only: a list's body is read whole.
AuditReport Audit::run_recent(const std::string& station, std::int64_t last) {
  Query q = db_.query("SELECT id, uuid FROM station WHERE name = ?", station);
  if (!q.next()) return std::move(report_);
  std::vector<Link> links;
  {
    Query rows = db_.query(
        "SELECT epoch, seq, kind, uuid, at_us, body_sha256, hash FROM journal WHERE station = ? "
        "ORDER BY epoch DESC, seq DESC LIMIT ?",
        q.integer(0), last + 1);
    while (rows.next()) links.push_back(link_of(rows, station, q.text(1)));
  }
  std::reverse(links.begin(), links.end());
  for (std::size_t i = 0; i < links.size(); ++i) {
    if (i == 0 && static_cast<std::int64_t>(links.size()) > last) continue;  // only its hash is needed
    check_hash(links[i], i == 0 ? nullptr : &links[i - 1]);
    if (links[i].row.kind == static_cast<int>(RecordKind::trial)) check_trial(links[i], q.integer(0));
  }
  if (db_.failed()) differs({});
  return std::move(report_);
}

void Audit::check_file() {
  Query q = db_.query("PRAGMA integrity_check(20)");
  while (q.next())
    if (q.text(0) != "ok") differs("SQLite's integrity check: " + q.text(0));
}

using SchemaText = std::map<std::string, std::string>;

SchemaText schema_of(Database& database) {
  SchemaText out;
  Query q = database.query("SELECT type || ' ' || name || ' on ' || tbl_name, sql FROM sqlite_schema");
  while (q.next()) out[q.text(0)] += q.text(1);
  return out;
}

void Audit::check_schema() {
  const auto fresh = Database::open(":memory:", Database::Access::write, true, 0);
  if (!fresh) return differs("no memory for the schema to compare with");
  lay_out(*fresh.value());
  const SchemaText expected = schema_of(*fresh.value()), held = schema_of(db_);
  for (const auto& [name, text] : expected) {
    const auto found = held.find(name);
    if (found == held.end()) differs("the schema lacks the " + name);
    if (found != held.end() && found->second != text) differs("the schema's text differs for the " + name);
  }
  for (const auto& [name, text] : held)
    if (!expected.contains(name)) differs("the schema has a foreign " + name);
}

void Audit::check_documents() {
  Query q = db_.query("SELECT sha256, kind, name, body FROM document");
  while (q.next())
    if (sha256(q.view(3)) != q.view(0))
      differs(fmt::format("the text of {} \"{}\" is not what its hash says", q.text(1), q.text(2)));
}

void Audit::check_chains() {
  entries_ = bodies_.entered(0, std::numeric_limits<Id>::max(),
                             [&](Id id, std::string_view bytes) { entry_hashes_[id].add(bytes); });
  {
    Query q = db_.query("SELECT id, uuid FROM entered");
    while (q.next()) entry_ids_[q.text(1)] = q.integer(0);
  }
  Query q = db_.query("SELECT id, name, uuid FROM station ORDER BY id");
  while (q.next()) check_chain(q.integer(0), q.text(1), q.text(2));
}

/// A station without a record has a trial under way, its first.
void Audit::check_silent(Id station, const std::string& name) {
  if (!db_.first("SELECT 1 FROM trial WHERE station = ? AND state = 0", station))
    differs(fmt::format("station {} has no record", name));
}

Audit::Link Audit::link_of(const Query& q, const std::string& station, const std::string& uuid) {
  return {station, uuid, {q.integer(0), q.integer(1), q.integer(2), q.text(3), q.integer(4), q.text(5)}, q.text(6)};
}

void Audit::check_chain(Id station, const std::string& name, const std::string& uuid) {
  Link link, before;
  bool first = true;
  Query q = db_.query(
      "SELECT epoch, seq, kind, uuid, at_us, body_sha256, hash FROM journal WHERE station = ? ORDER BY epoch, seq",
      station);
  while (q.next()) {
    link = link_of(q, name, uuid);
    check_link(link, first ? nullptr : &before, station);
    before = link;
    first = false;
    ++report_.records;
  }
  if (first) return check_silent(station, name);
  report_.heads.push_back({name, before.row.epoch, before.row.seq, before.row.at_us, before.hash});
}

bool Audit::check_hash(const Link& link, const Link* before) {
  const bool begins = before == nullptr || before->row.epoch != link.row.epoch;
  const std::int64_t due = begins ? 1 : before->row.seq + 1;
  if (link.row.seq != due) differs(fmt::format("record {} is missing before it", due), link, {});
  const std::string start = chain_start();
  if (record_hash(begins ? start : before->hash, link.uuid, link.row) != link.hash)
    differs("its hash does not follow from the record and the hash before it", link, {});
  return begins;
}

void Audit::check_link(const Link& link, const Link* before, Id station) {
  const bool begins = check_hash(link, before);
  if (before != nullptr && link.row.at_us < before->row.at_us - 1'000'000) ++report_.steps_back;
  if (begins) check_begins(link, before);
  check_body(link, station);
}

/// A later epoch begins with a record that names where the one before it ended. That one may lie elsewhere: in the
/// store that was damaged, or in the copy of an older layout.
void Audit::check_begins(const Link& link, const Link* before) {
  if (link.row.epoch == 1 && before == nullptr) return;
  Query q = db_.query("SELECT last_epoch, last_seq, last_hash FROM epoch_begun WHERE uuid = ?", Blob{link.row.uuid});
  if (link.row.kind != static_cast<int>(RecordKind::epoch_begun) || !q.next())
    return differs("an epoch begins without a record of its own", link, {});
  if (before == nullptr) return;
  if (q.integer(0) != before->row.epoch || q.integer(1) != before->row.seq || q.text(2) != before->hash)
    differs("the epoch names another end of the epoch before it", link, {});
}

void Audit::check_body(const Link& link, Id station) {
  switch (static_cast<RecordKind>(link.row.kind)) {
    case RecordKind::trial:
      return check_trial(link, station);
    case RecordKind::list_entered:
      return check_entered(link);
    case RecordKind::epoch_begun:
      return check_epoch(link);
    case RecordKind::readings_archived:
      return check_archived(link);
    case RecordKind::act:
      return check_act(link, station);
  }
  differs("this program knows no such record", link, {});
}

void Audit::check_trial(const Link& link, Id station) {
  const auto body = bodies_.trial(link.row.uuid, true);
  ++report_.trials;
  if (!body) return differs("its trial is not in the store", link, {});
  report_.findings += body->findings;
  readings_ += body->readings;
  report_.archived += body->readings - (body->readings_kept ? 1 : 0);
  if (!trials_.insert(body->id).second) differs("the trial was recorded before", link, body->serial);
  if (body->sha256 != link.row.body_sha256 || body->station != station || body->state == TrialState::open)
    differs("the rows are not what was recorded", link, body->serial);
  if (!body->misfit.empty()) differs(body->misfit, link, body->serial);
}

void Audit::check_epoch(const Link& link) {
  ++epochs_;
  const auto body = bodies_.epoch_begun(link.row.uuid);
  if (!body || sha256(*body) != link.row.body_sha256) differs("the rows are not what was recorded", link, {});
}

void Audit::check_archived(const Link& link) {
  ++archives_;
  const auto body = bodies_.archived(link.row.uuid);
  if (!body || sha256(*body) != link.row.body_sha256) differs("the rows are not what was recorded", link, {});
}

void Audit::check_act(const Link& link, Id station) {
  ++report_.acts;
  const auto body = bodies_.act(link.row.uuid);
  std::string kind;
  if (Query q = db_.query("SELECT kind, station, at_us FROM act WHERE uuid = ?", Blob{link.row.uuid}); q.next()) {
    kind = q.text(0);
    if (q.integer(1) != station || q.integer(2) != link.row.at_us)
      return differs("the rows are not what was recorded", link, kind);
  }
  if (!body || sha256(*body) != link.row.body_sha256) differs("the rows are not what was recorded", link, kind);
}

/// A trial under way, or cut short and not yet recorded so: its row bears its own hash.
void Audit::check_open(const std::string& serial, const std::string& uuid) {
  ++report_.open;
  const auto body = bodies_.trial(uuid);
  if (!body || body->sha256 != body->mark || body->findings + body->readings > 0)
    differs(fmt::format("the open trial of board {} is not as it was begun", serial));
}

void Audit::check_entered(const Link& link) {
  ++report_.lists;
  const auto id = entry_ids_.find(link.row.uuid);
  if (id == entry_ids_.end()) return differs("what it brought is not in the store", link, {});
  std::string name;
  if (Query q = db_.query("SELECT name FROM entered WHERE id = ?", id->second); q.next()) name = q.text(0);
  if (!entries_seen_.insert(id->second).second) return differs("the list was entered before", link, name);
  const Bodies::Entry& entry = entries_[id->second];
  if (entry_hashes_[id->second].digest() != link.row.body_sha256)
    differs("the rows are not what was recorded", link, name);
  orders_ += entry.orders;
  builds_ += entry.builds;
  reels_ += entry.reels;
  feeds_ += entry.feeds;
  dropped_ += entry.dropped;
}

/// Every trial has its records, and the one that speaks for a board is the one that does.
void Audit::check_trials() {
  std::string serial;
  Id board = 0;
  std::vector<PastTrial> trials;
  std::vector<Id> counts;
  Id attempt = 0;
  Query q = db_.query(
      "SELECT t.board, b.serial, t.id, t.state, t.judgement, t.counts, t.attempt, t.uuid, t.mark IS NULL, "
      "EXISTS(SELECT 1 FROM act a WHERE a.trial = t.uuid AND a.kind = 'review') FROM trial t "
      "INDEXED BY trial_board "
      "LEFT JOIN board b ON b.id = t.board ORDER BY t.board, t.id");
  while (q.next()) {
    if (q.integer(0) != board) {
      check_board(serial, trials, counts);
      board = q.integer(0);
      serial = q.text(1);
      trials.clear();
      counts.clear();
      attempt = 0;
    }
    trials.push_back({static_cast<Judgement>(q.integer(4)), q.integer(9) != 0});
    counts.push_back(q.integer(5));
    const bool recorded = trials_.contains(q.integer(2)), open = q.integer(3) == 0;
    if (!recorded && open) check_open(serial, q.text(7));
    if (!recorded && !open) differs(fmt::format("a trial of board {} has no record", serial));
    if (recorded && q.integer(8) == 0) differs(fmt::format("a trial of board {} bears a mark of being open", serial));
    // In a restored store an attempt may be missing, whose record was lost.
    const bool follows = epochs_ == 0 ? q.integer(6) == attempt + 1 : q.integer(6) > attempt;
    attempt = q.integer(6);
    if (!follows) differs(fmt::format("trial {} of board {} stands as its attempt {}", trials.size(), serial, attempt));
  }
  check_board(serial, trials, counts);
}

void Audit::check_board(const std::string& serial, const std::vector<PastTrial>& trials,
                        const std::vector<Id>& counts) {
  const auto speaks = speaking_trial(trials);
  for (std::size_t i = 0; i < trials.size(); ++i)
    if (counts[i] != (speaks == i ? 1 : 0))
      return differs(fmt::format("board {}: the trial that speaks for it is marked wrongly", serial));
}

void Audit::count(Sql held, std::int64_t recorded, const char* what) {
  const auto rows = db_.first(held);
  if (rows && *rows != recorded) differs(fmt::format("{} {} in the store, {} recorded", *rows, what, recorded));
}

/// @param first  the name of a row that should not be
void Audit::none(Sql first, const char* what) {
  Query q = db_.query(first);
  if (q.next()) differs(fmt::format("{}: \"{}\"", what, q.text(0)));
}

void Audit::check_counts() {
  if (db_.failed()) return;
  count("SELECT count(*) FROM finding", report_.findings, "findings");
  count("SELECT count(*) FROM reading_blob", readings_, "trials' readings");
  count("SELECT count(*) FROM journal", report_.records, "records");
  count("SELECT count(*) FROM entered", report_.lists, "lists");
  count("SELECT count(*) FROM epoch_begun", epochs_, "begins of an epoch");
  count("SELECT count(*) FROM act", report_.acts, "acts");
  none("SELECT key FROM act_value WHERE act NOT IN (SELECT id FROM act)", "a value of no act");
  count("SELECT count(*) FROM archived", archives_, "archives of readings");
  count("SELECT count(*) FROM product_order WHERE product IS NOT NULL OR entered IS NOT NULL", orders_, "products");
  count("SELECT count(*) FROM build", builds_, "build places");
  count("SELECT count(*) FROM reel", reels_, "reels");
  count("SELECT count(*) FROM feed", feeds_, "feeds");
  count("SELECT count(*) FROM feed WHERE dropped_us IS NOT NULL", dropped_, "feeds taken back");
  none(
      "SELECT c.name FROM credential c WHERE NOT EXISTS(SELECT 1 FROM act a WHERE a.kind = 'person' AND "
      "a.about = c.name)",
      "a person that no record names");
  none("SELECT about FROM act WHERE kind = 'person' AND about NOT IN (SELECT name FROM credential)",
       "a person on record who is not registered");
  check_people();
  none(
      "SELECT serial FROM board b WHERE NOT EXISTS(SELECT 1 FROM build WHERE board = b.id) AND "
      "NOT EXISTS(SELECT 1 FROM trial WHERE board = b.id) AND NOT EXISTS(SELECT 1 FROM act_board WHERE board = b.id)",
      "a board that no record names");
  none(
      "SELECT name FROM product_order WHERE id NOT IN (SELECT ord FROM build UNION SELECT ord FROM feed UNION "
      "SELECT ord FROM trial WHERE ord IS NOT NULL)",
      "an order that no record names");
  none("SELECT maker FROM lot WHERE id NOT IN (SELECT lot FROM reel)", "a lot that no record names, by its maker");
}

/// Role, badge and password are what the last record of the person says.
void Audit::check_people() {
  Query q = db_.query("SELECT name, role, badge, password, gone FROM credential");
  while (q.next()) {
    const PersonNow held{q.text(0), q.text(1), q.text(2), q.text(3), q.integer(4) != 0};
    if (!is_as_recorded(db_, held)) differs(fmt::format("{} may do other than was recorded", held.name));
  }
}

void Audit::check_meta() {
  if (db_.failed()) return;
  none("SELECT key FROM meta WHERE key NOT IN ('store', 'origin')", "a foreign key in meta");
  none("SELECT uuid FROM trial WHERE origin <> 2 AND origin IS NOT (SELECT value FROM meta WHERE key = 'origin')",
       "a trial of another origin than the store's");
}

}  // namespace

/// "trial of TB3-0001 (station bench 1, epoch 1, record 12): the rows are not what was recorded"
std::string sentence(const Difference& d) {
  if (d.record.empty()) return d.what;
  const std::string on = d.on.empty() ? "" : " of " + d.on;
  return fmt::format("{}{} (station {}, epoch {}, record {}): {}", d.record, on, d.station, d.epoch, d.seq, d.what);
}

Result<AuditReport> audit_recent(Database& database, const std::string& station, std::int64_t last) {
  Transaction reading(database, Transaction::Kind::read);
  if (!database.first("SELECT count(*) FROM sqlite_schema") && database.failed()) return database.error();
  return Audit(database).run_recent(station, last);
}

Result<AuditReport> audit(Database& database) {
  Transaction reading(database, Transaction::Kind::read);
  if (!database.first("SELECT count(*) FROM sqlite_schema") && database.failed()) return database.error();
  return Audit(database).run();
}

}  // namespace jigwright
