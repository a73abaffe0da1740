// The jig's checks in the store: acts of kind "jig-check", whose value "result" is "ok", "failed" or "in doubt". What
// was tried since the last one that decided anything is proved by none. One thread.
#pragma once
#include <string>
#include <vector>

#include "db/act.hpp"

namespace jigwright {

/// Writes the check. A failed one holds the boards tried at its station since the last check there that was ok or
/// failed (a failed one held those before it): an act "hold" with `hold_reason`, in the same transaction.
/// @return those boards, in the order of first trial; empty unless it failed. Error kind store.
Result<std::vector<std::string>> write_jig_check(Database& database, UuidMaker& uuids, const ActRecord& check,
                                                 const std::string& hold_reason);

}  // namespace jigwright
