// Takes lists of boards, reels and feeds into the store: all files together or none of them. What a file brings that
// the store already has is counted and left alone, so that a second time changes nothing. Db/'s writer; one thread.
#pragma once
#include <cstdint>
#include <memory>
#include <string>
#include <vector>

#include "base/source.hpp"

namespace jigwright {

class Database;
class UuidMaker;

/// For the journal: which station, and who where that is known.
struct EnteredBy {
  std::string station{"station"};
  std::string who;
};

struct EnteredFile {
  std::string name;
  std::string kind;  ///< "boards", "reels", "feeds"
  std::int64_t added{};
  std::int64_t unchanged{};
};

/// Reads and checks every file, then writes in one transaction. When `faults` holds a fault afterwards, nothing was
/// written and the list is empty; warnings do not hinder. Each file that brought something is a record of the journal.
/// @param now_us  UTC microseconds: date codes later than its week are faults, and the feeds are known from then on
/// @return Error kind store when the store could not be read or written; nothing was written then either
Result<std::vector<EnteredFile>> enter_lists(Database& database, UuidMaker& uuids,
                                             const std::vector<std::shared_ptr<const SourceText>>& sources,
                                             std::int64_t now_us, Faults& faults, const EnteredBy& by = {});

}  // namespace jigwright
