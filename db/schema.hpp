// The store's layout and its version. user_version counts layouts; application_id marks the file as ours. Times are
// integers, UTC microseconds since 1970, and end in _us; other numbers are in SI base units, their unit in `metric`.
#pragma once
#include <cstdint>

#include "db/sqlite.hpp"

namespace jigwright {

inline constexpr std::int64_t application_id = 0x4a494757;  ///< "JIGW"
inline constexpr std::int64_t layout_version = 3;

/// Makes the layout in an empty file, or checks that the file is a store of this layout or of an older one, which
/// db/migrate.hpp brings up to date. A newer layout, and a file that is not a store, are refused: Error kind store.
/// @param create   an empty file may be made into a store
/// @param uuid     bytes of the new store's identity
/// @return the file's layout, 1 .. layout_version
Result<std::int64_t> settle_schema(Database& database, bool create, std::string_view uuid);

/// Inside a transaction: the whole layout in an empty file; what came after an older layout. Both ways leave the same
/// schema text, which an audit compares.
void lay_out(Database& database);
void lay_out_after(Database& database, std::int64_t layout);

}  // namespace jigwright
