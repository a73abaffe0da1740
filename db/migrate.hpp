// Brings a store of an older layout up to date: a copy beside the file first, then all of it in one transaction, so
// that a power cut leaves the old layout whole. From layout 1: every trial and list on record gets its records in the
// journal, as it stands at that moment. db/'s own; one thread.
#pragma once
#include <cstdint>
#include <string>

#include "base/error.hpp"
#include "db/uuid.hpp"

namespace jigwright {

class Database;

/// @param now_us  UTC microseconds; the stamp of the records for lists, whose own is not known
/// @return what to tell a person: where the copy lies; empty when another process was first. Error kind store: nothing
///         was changed
Result<std::string> migrate(Database& database, UuidMaker& uuids, std::int64_t now_us);

}  // namespace jigwright
