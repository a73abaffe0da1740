#include "db/replay.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <limits>
#include <map>
#include <vector>

#include "db/act.hpp"
#include "db/bodies.hpp"
#include "db/digest.hpp"
#include "db/journal.hpp"
#include "db/readings_archive.hpp"
#include "db/sqlite.hpp"
#include "db/trial_copy.hpp"
#include "db/trial_writer.hpp"

namespace jigwright {
namespace {

using Id = std::int64_t;

class Replay {
 public:
  Replay(Database& database, UuidMaker& uuids, const CopySet& copies)
      : db_(database), uuids_(uuids), copies_(copies), writer_(database, uuids) {}

  Result<Replayed> run();

 private:
  /// The copies of one station that follow the store's own chain and each other, by their hashes.
  struct Way {
    std::vector<const RecordCopy*> records;
    std::size_t at{0};
    std::string gap;      ///< why it goes no further; empty = it is all there is
    std::string refused;  ///< why the next can't be added; empty = not tried since another was
    const RecordCopy* next() const { return at < records.size() ? records[at] : nullptr; }
  };
  Result<Way> way_of(const std::string& uuid, const CopySet::Chain& chain);
  Result<bool> add(Way& way);
  void note_trial(const RecordCopy& record);
  void write(const RecordCopy& record);
  void write_trial(const RecordCopy& record);
  void write_earlier(const TrialCopy& trial);
  Id station(const RecordCopy& record);
  void write_list(const RecordCopy& record);
  void write_row(char table, CanonicalReader& r, Id entry);
  void write_epoch(const RecordCopy& record);
  void write_archived(const RecordCopy& record);
  void write_act(const RecordCopy& record, Id at);
  void keep_document(const std::string& digits);
  Id named(Sql find, Sql make, const std::string& name);

  Database& db_;
  UuidMaker& uuids_;
  const CopySet& copies_;
  TrialWriter writer_;
  std::map<std::string, std::map<Id, const RecordCopy*>> trials_;  ///< by serial and attempt
  Replayed out_;
};

std::string place(const std::string& station, std::int64_t epoch, std::int64_t seq) {
  return fmt::format("station {}: record {} of epoch {}", station, seq, epoch);
}

using Places = CopySet::Chain::const_iterator;

Places first_at(const CopySet::Chain& chain, std::int64_t epoch, std::int64_t seq) {
  return chain.lower_bound({{epoch, seq}, {}});
}

/// The record's hash says that it stands behind the head.
bool follows(const RecordCopy& r, const JournalHead& head) {
  const std::string before = r.epoch == head.epoch ? head.hash : chain_start();
  return record_hash(before, r.station_uuid, {r.epoch, r.seq, r.kind, r.uuid, r.at_us, sha256(r.body)}) == r.hash;
}

/// A later epoch's first record, which names the head as the end of the epoch before.
bool begins_behind(const RecordCopy& r, const JournalHead& head) {
  if (r.epoch <= head.epoch || r.seq != 1) return false;
  CanonicalReader body(r.body);
  body.blob_column();
  body.text_column();
  body.maybe_text_column();
  const auto epoch = body.maybe_integer_column(), seq = body.maybe_integer_column();
  return epoch == head.epoch && seq == head.seq && body.blob_column() == head.hash && follows(r, head);
}

std::int64_t newest_us(Places from, Places to) {
  std::int64_t out = std::numeric_limits<std::int64_t>::min();
  for (; from != to; ++from) out = std::max(out, from->second.at_us);
  return out;
}

/// Behind one record two may stand: the one that was lost when the store was restored from there, and the epoch begun
/// then. The chain goes on where its newest record is.
const RecordCopy* record_behind(const JournalHead& head, const CopySet::Chain& chain,
                                const std::vector<const RecordCopy*>& begins) {
  const RecordCopy* out = nullptr;
  const auto first = first_at(chain, head.epoch, head.seq + 1), last = first_at(chain, head.epoch, head.seq + 2);
  for (auto at = first; at != last && out == nullptr; ++at)
    if (follows(at->second, head)) out = &at->second;
  for (const RecordCopy* record : begins) {
    if (!begins_behind(*record, head)) continue;
    const auto epoch_ends = first_at(chain, head.epoch + 1, 0);
    const bool newer =
        out == nullptr || newest_us(first_at(chain, record->epoch, 1), chain.end()) >= newest_us(first, epoch_ends);
    return newer ? record : out;
  }
  return out;
}

Result<Replay::Way> Replay::way_of(const std::string& uuid, const CopySet::Chain& chain) {
  JournalHead head{1, 0, chain_start()};
  if (const auto id = db_.first("SELECT id FROM station WHERE uuid = ?", Blob{uuid})) head = journal_head(db_, *id);
  if (db_.failed()) return db_.error();
  std::vector<const RecordCopy*> begins;  // the newest first
  for (auto at = chain.rbegin(); at != chain.rend(); ++at)
    if (at->second.kind == static_cast<int>(RecordKind::epoch_begun)) begins.push_back(&at->second);
  Way out;
  while (const RecordCopy* record = record_behind(head, chain, begins)) {
    out.records.push_back(record);
    head = {record->epoch, record->seq, record->hash};
  }
  const auto left = first_at(chain, head.epoch, head.seq + 1);
  if (left == chain.end()) return out;
  const bool due = left->first.first == ChainPlace{head.epoch, head.seq + 1};
  out.gap =
      place(left->second.station, head.epoch, head.seq + 1) + (due ? " is not sound" : " is missing from the copies");
  return out;
}

Result<Replayed> Replay::run() {
  std::vector<Way> ways;
  for (const auto& [uuid, chain] : copies_.chains) {
    auto way = way_of(uuid, chain);
    if (!way) return way.error();
    for (const RecordCopy* record : way.value().records) note_trial(*record);
    ways.push_back(std::move(way.value()));
  }
  for (;;) {
    Way* next = nullptr;
    for (Way& way : ways)
      if (way.next() != nullptr && way.refused.empty())
        if (next == nullptr || way.next()->at_us < next->next()->at_us) next = &way;
    if (next == nullptr) break;
    const auto added = add(*next);
    if (!added) return added.error();
    if (added.value())
      for (Way& way : ways) way.refused.clear();  // it may have waited for this one
  }
  for (const Way& way : ways) {
    const std::string& why = way.next() == nullptr ? way.gap : way.refused;
    if (!why.empty()) out_.gaps.push_back(why);
  }
  return std::move(out_);
}

/// So that the trials of one board can be begun in their order.
void Replay::note_trial(const RecordCopy& record) {
  if (record.kind != static_cast<int>(RecordKind::trial)) return;
  CanonicalReader body(record.body);
  body.blob_column();
  const std::string serial = body.text_column();
  for (int i = 0; i < 3; ++i) body.integer_column();
  const Id attempt = body.integer_column();
  if (!body.failed()) trials_[serial][attempt] = &record;
}

/// @return false when the record can't be added now; nothing of it stands then
Result<bool> Replay::add(Way& way) {
  const RecordCopy& record = *way.next();
  {
    Transaction transaction(db_, Transaction::Kind::write);
    write(record);
    JournalHead head;
    if (!db_.failed()) head = journal_head(db_, station(record));
    if (!db_.failed() && head.hash == record.hash) {
      if (const auto done = transaction.commit(); !done) return done.error();
      ++way.at;
      ++out_.added;
      return true;
    }
    if (db_.failed() && !db_.refused_values()) return db_.error();
    way.refused = place(record.station, record.epoch, record.seq) + " can't be used";
    way.refused += db_.failed() ? ": " + db_.error().what : ": it names what is not in the copies";
  }
  writer_.forget();
  return false;
}

void Replay::write(const RecordCopy& record) {
  const Id at = station(record);
  switch (static_cast<RecordKind>(record.kind)) {
    case RecordKind::trial:
      return write_trial(record);
    case RecordKind::list_entered: {
      write_list(record);
      const Id id = db_.first("SELECT id FROM entered WHERE uuid = ?", Blob{record.uuid}).value_or(0);
      return append_lists(db_, at, id, id, record.at_us);
    }
    case RecordKind::epoch_begun:
      return write_epoch(record);
    case RecordKind::readings_archived: {
      write_archived(record);
      const auto body = Bodies(db_).archived(record.uuid);
      if (body && !db_.failed())
        append_record(db_, at, RecordKind::readings_archived, record.uuid, record.at_us, sha256(*body));
      return;
    }
    case RecordKind::act: {
      write_act(record, at);
      const auto body = Bodies(db_).act(record.uuid);
      if (body && !db_.failed()) append_record(db_, at, RecordKind::act, record.uuid, record.at_us, sha256(*body));
      return;
    }
  }
}

void Replay::write_trial(const RecordCopy& record) {
  const auto copy = trial_copy(record, copies_);
  if (!copy || copy->station_uuid != record.station_uuid) return;
  write_earlier(*copy);
  writer_.replay(*copy);
}

/// Earlier trials of the board that have no record yet, as when they were begun: on another station, cut short there
/// and found later, or with a stamp of a clock that was set back.
void Replay::write_earlier(const TrialCopy& trial) {
  const auto board = trials_.find(trial.start.serial);
  if (board == trials_.end()) return;
  for (const auto& [attempt, record] : board->second) {
    if (attempt >= trial.attempt) return;
    if (db_.first("SELECT 1 FROM trial WHERE uuid = ?", Blob{record->uuid})) continue;
    const auto earlier = trial_copy(*record, copies_);
    if (!earlier || earlier->station_uuid != record->station_uuid) continue;
    station(*record);
    writer_.replay_begin(*earlier);
  }
}

Id Replay::station(const RecordCopy& record) {
  if (const auto id = db_.first("SELECT id FROM station WHERE uuid = ?", Blob{record.station_uuid})) return *id;
  db_.run("INSERT INTO station(uuid, name) VALUES(?, ?)", Blob{record.station_uuid}, record.station);
  return db_.last_id();
}

Id Replay::named(Sql find, Sql make, const std::string& name) {
  if (const auto id = db_.first(find, name)) return *id;
  db_.run(make, name);
  return db_.last_id();
}

void Replay::write_list(const RecordCopy& record) {
  CanonicalReader r(record.body);
  Id entry = 0;
  while (!r.at_end() && !db_.failed()) {
    const char table = r.mark();
    if (table == 'e') {
      const std::string uuid = r.blob_column(), kind = r.text_column(), name = r.text_column();
      db_.run("INSERT INTO entered(uuid, kind, name, who) VALUES(?, ?, ?, ?)", Blob{uuid}, kind, name,
              r.maybe_text_column());
      entry = db_.last_id();
    } else {
      write_row(table, r, entry);
    }
  }
}

void Replay::write_row(char table, CanonicalReader& r, Id entry) {
  const auto order = [&](const std::string& name) {
    return named("SELECT id FROM product_order WHERE name = ?", "INSERT INTO product_order(name) VALUES(?)", name);
  };
  if (table == 'o') {
    const Id id = order(r.text_column());
    db_.run("UPDATE product_order SET product = ?, entered = ? WHERE id = ?", r.maybe_text_column(), entry, id);
  } else if (table == 'b') {
    const Id in = order(r.text_column());
    const Id number = r.integer_column();
    const Id board =
        named("SELECT id FROM board WHERE serial = ?", "INSERT INTO board(serial) VALUES(?)", r.text_column());
    db_.run("INSERT INTO build(ord, build_no, board, panel, entered) VALUES(?, ?, ?, ?, ?)", in, number, board,
            r.maybe_text_column(), entry);
  } else if (table == 'r') {
    const std::string name = r.text_column(), maker = r.text_column(), part = r.text_column(), lot = r.text_column();
    db_.run("INSERT OR IGNORE INTO lot(maker, part, lot) VALUES(?, ?, ?)", maker, part, lot);
    const auto of = db_.first("SELECT id FROM lot WHERE maker = ? AND part = ? AND lot = ?", maker, part, lot);
    const auto week = r.maybe_text_column(), distributor = r.maybe_text_column();
    const auto rereeled = r.maybe_integer_column(), quantity = r.maybe_integer_column();
    db_.run(
        "INSERT INTO reel(name, lot, date_code, distributor, rereeled, quantity, marking, entered) "
        "VALUES(?, ?, ?, ?, ?, ?, ?, ?)",
        name, of, week, distributor, rereeled, quantity, r.maybe_text_column(), entry);
  } else if (table == 'f') {
    const std::string uuid = r.blob_column();
    const Id in = order(r.text_column());
    const std::string designator = r.text_column(), reel = r.text_column();
    const Id poss_from = r.integer_column(), cert_from = r.integer_column(), cert_to = r.integer_column(),
             poss_to = r.integer_column(), repair = r.integer_column();
    const auto since_us = r.maybe_integer_column();
    db_.run(
        "INSERT INTO feed(uuid, ord, designator, reel, poss_from, cert_from, cert_to, poss_to, repair, since_us, "
        "known_us, entered) VALUES(?, ?, ?, (SELECT id FROM reel WHERE name = ?), ?, ?, ?, ?, ?, ?, ?, ?)",
        Blob{uuid}, in, designator, reel, poss_from, cert_from, cert_to, poss_to, repair, since_us, r.integer_column(),
        entry);
  } else if (table == 'd') {
    const std::string uuid = r.blob_column();
    db_.run("UPDATE feed SET dropped_us = ?, dropped_by = ? WHERE uuid = ?", r.integer_column(), entry, Blob{uuid});
  } else {
    r.fail();  // the record's hash will not come out
  }
}

void Replay::write_epoch(const RecordCopy& record) {
  CanonicalReader r(record.body);
  const std::string uuid = r.blob_column(), reason = r.text_column();
  const auto who = r.maybe_text_column();
  const auto last_epoch = r.maybe_integer_column(), last_seq = r.maybe_integer_column();
  const std::string last_hash = r.blob_column();
  db_.run("INSERT INTO epoch_begun(uuid, reason, who, last_epoch, last_seq, last_hash) VALUES(?, ?, ?, ?, ?, ?)",
          Blob{uuid}, reason, who, last_epoch, last_seq, Blob{last_hash});
  append_epoch(db_, station(record), record.epoch, uuid, record.at_us);
}

void Replay::write_archived(const RecordCopy& record) {
  CanonicalReader r(record.body);
  const std::string uuid = r.blob_column();
  const auto who = r.maybe_text_column();
  const Id before_us = r.integer_column(), trials = r.integer_column(), length = r.integer_column();
  const std::string name = r.text_column(), digest = r.blob_column();
  db_.run("INSERT INTO archived(uuid, who, before_us, trials, bytes, name, sha256) VALUES(?, ?, ?, ?, ?, ?, ?)",
          Blob{uuid}, who, before_us, trials, length, name, Blob{digest});
  drop_readings(db_, before_us);
}

/// A document that an adopted revision names by its hash.
void Replay::keep_document(const std::string& digits) {
  for (const auto& [digest, document] : copies_.documents)
    if (hex(digest) == digits)
      db_.run("INSERT OR IGNORE INTO document(sha256, kind, name, body) VALUES(?, ?, ?, ?)", Blob{digest},
              document.kind, document.name, document.text);
}

void Replay::write_act(const RecordCopy& record, Id at) {
  CanonicalReader r(record.body);
  const std::string uuid = r.blob_column(), kind = r.text_column();
  const Id at_us = r.integer_column();
  const auto who = r.maybe_text_column(), second = r.maybe_text_column(), reason = r.maybe_text_column(),
             about = r.maybe_text_column();
  const std::string ends = r.blob_column(), trial = r.blob_column();
  const auto blob = [](const std::string& b) { return b.empty() ? std::nullopt : std::optional(Blob{b}); };
  db_.run(
      "INSERT INTO act(uuid, station, kind, at_us, who, second, reason, about, ends, trial) "
      "VALUES(?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
      Blob{uuid}, at, kind, at_us, who, second, reason, about, blob(ends), blob(trial));
  const Id act = db_.last_id();
  while (!r.at_end() && !db_.failed()) {
    const char row = r.mark();
    if (row == 'b') {
      const Id board =
          named("SELECT id FROM board WHERE serial = ?", "INSERT INTO board(serial) VALUES(?)", r.text_column());
      db_.run("INSERT INTO act_board(act, board, attempts) VALUES(?, ?, ?)", act, board, r.integer_column());
    } else if (row == 'v') {
      const std::string key = r.text_column();
      const std::string value = r.text_column();
      db_.run("INSERT INTO act_value(act, key, value) VALUES(?, ?, ?)", act, key, value);
      if (kind == "adopt") keep_document(value);
    } else {
      r.fail();
    }
  }
  settle_after(db_, uuid);
}

}  // namespace

Result<Replayed> replay(Database& database, UuidMaker& uuids, const CopySet& copies) {
  return Replay(database, uuids, copies).run();
}

}  // namespace jigwright
