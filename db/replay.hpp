// Writes copies of records into a store again: each record's rows are made anew from its body, and the record they give
// must bear the hash that the copy bears, or nothing of it stands. Db/'s writer; one thread.
#pragma once
#include <cstdint>
#include <string>
#include <vector>

#include "db/record_copy.hpp"

namespace jigwright {

class Database;
class UuidMaker;

struct Replayed {
  std::int64_t added{};
  /// Why a station's copies could not be used to their end: "station bench 1: record 13 of epoch 1 is missing".
  std::vector<std::string> gaps;
};

/// Adds what follows the store's own chains, in the order of each chain, chains merged by their stamps as far as one
/// does not need the other. Copies of records that the store has are passed over. Stops a chain at the first record
/// that is missing or not sound; where the chain was once restored from that record, it goes on in the epoch begun
/// then. A trial that began before another of its board stands before it, as open where its record can't be used. Error
/// kind store: the store failed; the records before stand.
Result<Replayed> replay(Database& database, UuidMaker& uuids, const CopySet& copies);

}  // namespace jigwright
