// Which trial speaks for a board, kept in its rows: trial.counts, derived from the board's trials and their reviews
// (speaks.hpp). Db/'s own; inside a write transaction.
#pragma once
#include <cstdint>

namespace jigwright {

class Database;

/// @param board  row of `board`
void settle_counts(Database& database, std::int64_t board);

}  // namespace jigwright
