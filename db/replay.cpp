#include "db/replay.hpp"

#include <fmt/format.h>

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
  struct Next {
    CopySet::Chain::const_iterator at, end;
    JournalHead head;
  };
  Result<Next> first_of(const std::string& uuid, const CopySet::Chain& chain);
  std::string missing(const Next& next) const;
  Result<bool> add(Next& next);
  void write(const RecordCopy& record);
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
  Replayed out_;
};

std::string place(const RecordCopy& r) {
  return fmt::format("station {}: record {} of epoch {}", r.station, r.seq, r.epoch);
}

/// The first copy behind what the store has.
Result<Replay::Next> Replay::first_of(const std::string& uuid, const CopySet::Chain& chain) {
  Next out{chain.begin(), chain.end(), {1, 0, chain_start()}};
  if (const auto id = db_.first("SELECT id FROM station WHERE uuid = ?", Blob{uuid})) out.head = journal_head(db_, *id);
  out.at = chain.upper_bound({out.head.epoch, out.head.seq});
  return db_.result(out);
}

/// Why the next copy does not follow the chain; empty = it does.
std::string Replay::missing(const Next& next) const {
  const RecordCopy& r = next.at->second;
  const bool follows = r.epoch == next.head.epoch && r.seq == next.head.seq + 1;
  const bool begins = r.epoch == next.head.epoch + 1 && r.seq == 1;
  if (follows || begins) return {};
  return fmt::format("station {}: record {} of epoch {} is missing from the copies", r.station,
                     r.epoch == next.head.epoch ? next.head.seq + 1 : 1, r.epoch);
}

Result<Replayed> Replay::run() {
  std::vector<Next> chains;
  for (const auto& [uuid, chain] : copies_.chains) {
    auto next = first_of(uuid, chain);
    if (!next) return next.error();
    if (next.value().at != next.value().end) chains.push_back(next.value());
  }
  while (!chains.empty()) {
    auto next = chains.begin();
    for (auto other = chains.begin(); other != chains.end(); ++other)
      if (other->at->second.at_us < next->at->second.at_us) next = other;
    const auto added = add(*next);
    if (!added) return added.error();
    if (!added.value() || next->at == next->end) chains.erase(next);
  }
  return std::move(out_);
}

/// @return false when the chain goes no further; nothing of the record stands then
Result<bool> Replay::add(Next& next) {
  const std::string gap = missing(next);
  if (!gap.empty()) {
    out_.gaps.push_back(gap);
    return false;
  }
  const RecordCopy& record = next.at->second;
  {
    Transaction transaction(db_, Transaction::Kind::write);
    write(record);
    JournalHead head;
    if (!db_.failed()) head = journal_head(db_, station(record));
    if (!db_.failed() && head.hash == record.hash) {
      if (const auto done = transaction.commit(); !done) return done.error();
      next.head = head;
      ++next.at;
      ++out_.added;
      return true;
    }
  }
  const bool full = db_.failed() && db_.error().kind == Error::Kind::store && !db_.error().what.empty();
  out_.gaps.push_back(place(record) + " is not sound" + (full ? ": " + db_.error().what : std::string()));
  db_.clear_error();
  return false;
}

void Replay::write(const RecordCopy& record) {
  const Id at = station(record);
  switch (static_cast<RecordKind>(record.kind)) {
    case RecordKind::trial: {
      const auto copy = trial_copy(record, copies_);
      if (copy && copy->station_uuid == record.station_uuid) writer_.replay(*copy);
      return;
    }
    case RecordKind::list_entered:
      write_list(record);
      return append_record(db_, at, RecordKind::list_entered, record.uuid, record.at_us, sha256(record.body));
    case RecordKind::epoch_begun:
      return write_epoch(record);
    case RecordKind::readings_archived:
      write_archived(record);
      return append_record(db_, at, RecordKind::readings_archived, record.uuid, record.at_us, sha256(record.body));
    case RecordKind::act:
      write_act(record, at);
      return append_record(db_, at, RecordKind::act, record.uuid, record.at_us, sha256(record.body));
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
  append_epoch(db_, station(record), uuid, record.at_us);
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
      "INSERT INTO act(uuid, station, kind, at_us, who, second, reason, about, ends, trial, after_trial) "
      "VALUES(?, ?, ?, ?, ?, ?, ?, ?, ?, ?, (SELECT coalesce(max(id), 0) FROM trial))",
      Blob{uuid}, at, kind, at_us, who, second, reason, about, blob(ends), blob(trial));
  const Id act = db_.last_id();
  while (!r.at_end() && !db_.failed()) {
    const char row = r.mark();
    if (row == 'b') {
      const Id board =
          named("SELECT id FROM board WHERE serial = ?", "INSERT INTO board(serial) VALUES(?)", r.text_column());
      db_.run("INSERT INTO act_board(act, board) VALUES(?, ?)", act, board);
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
