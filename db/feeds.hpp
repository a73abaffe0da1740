// Feeds as they happen at the line: a reel change from a board on, a part placed by hand in a repair. Each is a record
// of its own among the lists; what was recorded before is taken back by it, never overwritten. A transaction each;
// db/'s writer; one thread.
#pragma once
#include <cstdint>
#include <string>

#include "base/error.hpp"
#include "db/uuid.hpp"

namespace jigwright {

class Database;

struct FeedChange {
  std::string designator, reel;
  std::string serial;  ///< the first board with the reel, or the repaired one; empty = `order` and `build_no` say it
  std::string order;
  std::int64_t build_no{};
  std::string station, who;
  std::int64_t at_us{};
};

struct FeedChanged {
  std::string order;
  std::int64_t from{}, to{};  ///< build places
  std::string before;         ///< the reel that served the place until now; empty = none on record
};

/// The reel serves the designator from that board to the order's end. Error kind usage: unknown board, order or reel.
Result<FeedChanged> change_reel(Database& database, UuidMaker& uuids, const FeedChange& change);

/// The board carries the reel at the designator from now on. Inside the caller's transaction.
Result<FeedChanged> add_repair_feed(Database& database, UuidMaker& uuids, const FeedChange& change);

}  // namespace jigwright
