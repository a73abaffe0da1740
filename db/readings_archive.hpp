// Raw readings are most of a store, and are needed only to work judgements out again: those of old trials may be
// archived away. Their hash stays under the trial's record, and taking them out is a record of its own. Db/'s writer;
// one thread.
#pragma once
#include <cstdint>
#include <string>

#include "base/error.hpp"
#include "db/uuid.hpp"

namespace jigwright {

class Database;

struct Archived {
  std::int64_t trials{};
  std::int64_t bytes{};  ///< of raw readings
};

inline constexpr std::int64_t archived_at_once = 20'000;  ///< trials: the line waits a second or two for such a step

/// Writes the records of trials that began before `before_us` and still have their raw readings, the oldest
/// `at_once` of them, to a new file of copies (record_copy.hpp), reads the file back from the disk, and takes the
/// readings out of the store. Call it again until no trial was left.
/// @param file  must not exist
/// @param station  whose record it is
/// @return Error kind store: the file or the store; the store is then unchanged
Result<Archived> archive_readings(Database& database, UuidMaker& uuids, const std::string& file, std::int64_t before_us,
                                  const std::string& station, const std::string& who, std::int64_t now_us,
                                  std::int64_t at_once = archived_at_once);

/// In the caller's transaction: in place of the readings of trials that began before, their hashes.
/// @return trials
std::int64_t drop_readings(Database& database, std::int64_t before_us);

}  // namespace jigwright
