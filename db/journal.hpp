// The journal: one row a record, in one chain a station and epoch. A record's hash covers the hash before it and its
// own body's, so that nothing can be changed, dropped or put between without a break, while bodies may be archived
// away. Rows are only added. Stamps are as the clock read, even where it stepped back: the order of a chain is its seq.
// The layout of hash and bodies is docs/store.md. db/'s own, but for the log; one thread.
#pragma once
#include <cstdint>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.hpp"
#include "db/uuid.hpp"

namespace jigwright {

class Database;

/// Stored; never renumbered. 1 and 2 were layout 2's begin and end of a trial.
enum class RecordKind : std::uint8_t { list_entered = 3, trial = 4, epoch_begun = 5, readings_archived = 6, act = 7 };

/// "trial", "list entered"
std::string record_word(std::int64_t kind);

struct JournalRow {
  std::int64_t epoch{1}, seq{1};
  std::int64_t kind{};
  std::string uuid;  ///< bytes; of the trial, or of the row in `entered`, `epoch_begun`, `archived`, `act`
  std::int64_t at_us{};
  std::string body_sha256;  ///< 32 bytes
};

/// What a chain's first record has before it: 32 zero bytes.
std::string chain_start();

/// SHA-256 of the hash before, the station's uuid, epoch, seq, kind, uuid, at_us and the body's hash in canonical form.
std::string record_hash(std::string_view before, std::string_view station_uuid, const JournalRow& row);

/// Adds a record at the head of the station's chain (its highest epoch), within the caller's write transaction, which
/// therefore sees what other processes added before.
/// @param station  row of `station`; missing = the database fails
void append_record(Database& database, std::int64_t station, RecordKind kind, std::string_view uuid, std::int64_t at_us,
                   std::string_view body_sha256);

/// A record for each row of `entered` in first .. last.
void append_lists(Database& database, std::int64_t station, std::int64_t first, std::int64_t last, std::int64_t at_us);

/// The end of the station's chain, its highest epoch's; seq 0 and chain_start() where there is none.
struct JournalHead {
  std::int64_t epoch{1}, seq{0};
  std::string hash;
};
JournalHead journal_head(Database& database, std::int64_t station);

/// Begins the station's next epoch: its first record names the head before it. Where the station has no record yet,
/// nothing is done: its first epoch begins by itself.
/// @param least  the new epoch's number at least: above those that stand elsewhere
void begin_epoch(Database& database, UuidMaker& uuids, std::int64_t station, const std::string& reason,
                 const std::string& who, std::int64_t at_us, std::int64_t least = 2);

/// The first record of that epoch, whose row in `epoch_begun` is there.
void append_epoch(Database& database, std::int64_t station, std::int64_t epoch, std::string_view uuid,
                  std::int64_t at_us);

/// Row of the station's name, made when it is new.
std::int64_t station_row(Database& database, UuidMaker& uuids, const std::string& name, std::int64_t at_us);

/// Who did what when.
struct LogLine {
  std::string station;
  std::int64_t epoch{}, seq{};
  std::int64_t at_us{};
  std::string who;   ///< empty = not known
  std::string what;  ///< "trial: NO-GO", "boards entered"
  std::string on;    ///< serial, or the file's name
};

/// Newest last: a chain in its own order, several chains merged by their stamps.
/// @param serial  only its trials and the list that placed it; empty = everything
/// @param last    at most so many, the newest; from 1
/// @return Error kind usage for an unknown serial; kind store
Result<std::vector<LogLine>> read_log(Database& database, const std::string& serial, std::int64_t last);

}  // namespace jigwright
