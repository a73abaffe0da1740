// What people and the line do beside trials: holds, releases, repairs, shipments, reviews, log-ins, adopted revisions.
// Each is one record of the same form: who, why, about what, which boards, and named values. A kind is a word; what its
// values mean stands with whoever writes it. Records are only added: an act that ends another names it. Db/'s writer;
// one thread.
#pragma once
#include <cstdint>
#include <map>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.hpp"
#include "db/uuid.hpp"

namespace jigwright {

class Database;

struct ActRecord {
  Uuid uuid{};                                ///< given when it is written
  std::string kind;                           ///< "hold"
  std::int64_t at_us{};                       ///< UTC
  std::string station;                        ///< whose chain it joins
  std::string who;                            ///< empty = not known, as are the next
  std::string second;                         ///< who approved it, where two are needed
  std::string reason;                         ///< in the person's words
  std::string about;                          ///< "order WO-1041", "reel R-7003", a customer
  std::vector<std::string> boards;            ///< serials
  std::map<std::string, std::string> values;  ///< by name
  std::optional<Uuid> ends;                   ///< the act that this one lifts
  std::optional<Uuid> trial;                  ///< the trial that it is about
};

/// Writes the act and its record, in the caller's transaction; boards that the store does not know become known.
/// @return its uuid; a failure sticks to the database
Uuid add_act(Database& database, UuidMaker& uuids, const ActRecord& act);

/// What follows from an act that has just been written, in the caller's transaction: a review makes another trial speak
/// for its board, a person's rights become what it says.
void settle_after(Database& database, std::string_view uuid);

/// add_act() as a transaction of its own. Error kind store.
Result<Uuid> write_act(Database& database, UuidMaker& uuids, const ActRecord& act);

/// Acts of a kind, oldest first. In the caller's transaction.
std::vector<ActRecord> acts_of(Database& database, const std::string& kind);
/// Acts that list the board, or are about one of its trials, oldest first.
std::vector<ActRecord> acts_on(Database& database, const std::string& serial);
/// The newest of a kind about something; empty `about` = about anything.
std::optional<ActRecord> last_act(Database& database, const std::string& kind, const std::string& about = {});

}  // namespace jigwright
