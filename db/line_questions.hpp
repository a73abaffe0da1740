// What the line asks the store between two boards. Each call is one short reading transaction. One thread.
#pragma once
#include <cstdint>
#include <optional>
#include <string>

#include "base/error.hpp"
#include "db/revisions.hpp"

namespace jigwright {

struct OrderCounts {
  std::int64_t all{};      ///< build places
  std::int64_t tried{};    ///< boards, like the next
  std::int64_t go{};       ///< by the trial that speaks for each
  std::int64_t waiting{};  ///< GO after a NO-GO that was not reviewed
  std::int64_t held{};
  std::int64_t voids{};  ///< VOID by the trial that speaks for each
};
Result<OrderCounts> order_counts(Database& database, const std::string& order);

Result<bool> is_reel(Database& database, const std::string& label);

/// Boards of the order tried with these files since an engineer approved the order's first ones under them; nullopt
/// where that was done.
Result<std::optional<std::int64_t>> unapproved_boards(Database& database, const std::string& order,
                                                      const RevisionFiles& files);

/// Why the station's line was stopped, where no engineer has let it go on; empty = it was not.
Result<std::string> stop_in_force(Database& database, const std::string& station);

}  // namespace jigwright
