// Who may do what. Operators are known by badge, engineers by password (Argon2id, RFC 9106, by libsodium). Each change
// is an act of kind "person" about the name, with values role, badge, gone and the password's fingerprint; the password
// itself is in no record, so one set after the last backup must be set again after a restore. Inside the caller's
// transaction unless said otherwise; one thread.
#pragma once
#include <cstdint>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.hpp"
#include "db/uuid.hpp"

namespace jigwright {

class Database;

inline constexpr std::string_view operator_role = "operator";
inline constexpr std::string_view engineer_role = "engineer";

struct PersonNow {
  std::string name;
  std::string role;      ///< operator_role or engineer_role
  std::string badge;     ///< empty = none
  std::string password;  ///< as libsodium writes it; empty = none
  bool gone{false};      ///< may do nothing any more
};

struct PersonChange {
  std::string name, role, badge;
  std::optional<std::string> password;  ///< a new one
  bool gone{false};                     ///< gives the badge back: another may bear it
  std::string by, station;
  std::int64_t at_us{};
};

/// A transaction of its own. Error kind usage: an unknown role, a badge that another bears, an engineer without a
/// password, a password shorter than 8 characters; kind store.
Result<Done> change_person(Database& database, UuidMaker& uuids, const PersonChange& change);

std::vector<PersonNow> all_people(Database& database);
std::optional<PersonNow> person_of(Database& database, const std::string& name);
std::optional<PersonNow> person_of_badge(Database& database, const std::string& badge);
/// An engineer is registered: from then on an engineer's acts need a password.
bool has_engineers(Database& database);

bool password_fits(const PersonNow& person, const std::string& password);

/// Whether the row is what the person's last record says.
bool is_as_recorded(Database& database, const PersonNow& person);
/// After an act of kind "person": its row. A password that was not set here stays empty.
void settle_person(Database& database, std::string_view act_uuid);

}  // namespace jigwright
