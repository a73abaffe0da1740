// Adopted revisions: which plan, jig and limits are in force, for an order or for every order, by whom and why. An
// adoption is an act ("adopt") whose values name the files by their SHA-256; the files' texts are kept as documents.
// Its number is issued by the store it is made in, and it names its parent. Inside the caller's transaction unless said
// otherwise; one thread.
#pragma once
#include <cstdint>
#include <optional>
#include <string>

#include "base/error.hpp"
#include "db/act.hpp"
#include "db/trial_record.hpp"

namespace jigwright {

struct RevisionFiles {
  std::string plan, jig, limits;  ///< full texts
};

struct Adopted {
  std::int64_t number{};
  std::string order;              ///< empty = every order without a revision of its own
  std::string plan, jig, limits;  ///< SHA-256 in hex digits
  std::string parent;             ///< uuid of the revision before it, as text; empty = the first
  std::string authority;          ///< the station that issued the number
  bool earlier_stand{true};       ///< trials before it keep their judgement; else they no longer count for shipment
  std::string who, second, reason;
  std::int64_t at_us{};
  Uuid uuid{};
};

struct Adopting {
  RevisionFiles files;
  std::string order, station, who, second, reason;
  bool earlier_stand{true};
  std::int64_t at_us{};
};

/// A transaction of its own. Error kind usage: the same files are in force already; kind store.
Result<Adopted> adopt(Database& database, UuidMaker& uuids, const Adopting& adopting);

/// What is in force for the order: its own newest, else the newest for every order; nullopt where nothing was adopted.
std::optional<Adopted> adopted_for(Database& database, const std::string& order);
/// Newest last.
std::vector<Adopted> all_adopted(Database& database);

/// Whether a trial says nothing of its board under the order's revisions: a later one says that trials before it don't
/// stand, and the trial was not played with the files of the last such nor of any after it; or it was played beside the
/// revision in force, with other files than are in force now.
/// @param adopted  as the trial has it
/// @param setup    row
bool is_withdrawn(Database& database, const std::string& order, std::optional<std::int64_t> adopted,
                  std::int64_t setup);

/// What differs from the revision in force: "limits", "plan and jig"; empty = nothing.
std::string differing(const Adopted& adopted, const RevisionFiles& files);

}  // namespace jigwright
