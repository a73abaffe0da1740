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
  std::string record;   ///< "trial ended", "list entered"; empty where no record is to blame, as are the next
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
  std::int64_t records{}, trials{}, findings{}, lists{};
  std::int64_t steps_back{};  ///< records stamped more than 1 s before the one before: the clock was set back. No fault
  std::vector<ChainHead> heads;
  bool whole() const { return found == 0; }
};

/// Error kind store only when nothing can be read at all; a damaged page is a difference.
Result<AuditReport> audit(Database& database);

}  // namespace jigwright
