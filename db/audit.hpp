// The audit: is what the store holds what was recorded? It runs SQLite's own integrity check, compares the schema's
// text with this layout's, follows every chain, takes every record's canonical body from the rows again, works derived
// columns out anew, and looks for rows that no record accounts for. It only reads, in one transaction: a writer goes on
// beside it, and its records since count as not yet there. What it can't see is a chain cut off at its end together
// with its rows: for that, a head noted elsewhere is compared with the one on the page. One thread.
#pragma once
#include <cstdint>
#include <string>
#include <vector>

#include "base/error.hpp"

namespace jigwright {

class Database;

/// One thing that is not as recorded.
struct Difference {
  std::string what;     ///< "the rows are not what was recorded"
  std::string record;   ///< "trial", "list entered"; empty where no record is to blame, as are the next
  std::string on;       ///< serial, or the file's name
  std::string station;  ///< its name
  std::int64_t epoch{}, seq{};
};

/// Where a chain ends.
struct ChainHead {
  std::string station;
  std::int64_t epoch{}, seq{};
  std::int64_t at_us{};
  std::string hash;  ///< 32 bytes
};

struct AuditReport {
  static constexpr std::size_t most_listed = 100;
  std::vector<Difference> differences;  ///< at most most_listed: the file, then records as chained, then rows
  std::int64_t found{};                 ///< all of them
  std::int64_t records{}, trials{}, findings{}, lists{}, acts{};
  std::int64_t open{};        ///< trials without a record yet: under way, or cut short and not yet recorded so
  std::int64_t archived{};    ///< trials whose raw readings were archived away: their hash stands
  std::int64_t steps_back{};  ///< records stamped more than 1 s before the one before: the clock was set back. No fault
  std::vector<ChainHead> heads;
  bool whole() const { return found == 0; }
};

/// "trial of TB3-0001 (station bench 1, epoch 1, record 12): the rows are not what was recorded"
std::string sentence(const Difference& difference);

/// What to do about a damaged store.
inline constexpr const char* restore_advice =
    "put the file aside as it is, and restore the last backup with \"jigwright restore\"";

/// The end of a station's chain and the trials there: quick enough for every start. Checks of the whole file are
/// audit()'s. Errors as there.
/// @param last  records
Result<AuditReport> audit_recent(Database& database, const std::string& station, std::int64_t last = 200);

/// Error kind store only when nothing can be read at all; a damaged page is a difference.
Result<AuditReport> audit(Database& database);

}  // namespace jigwright
