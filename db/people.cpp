#include "db/people.hpp"

#include <fmt/format.h>
#include <sodium.h>

#include "db/act.hpp"
#include "db/digest.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

constexpr std::size_t shortest_password = 8;

PersonNow person(const Query& q) {
  return {q.text(0), q.text(1), q.text(2), q.text(3), q.integer(4) != 0};
}

Error usage(std::string what, std::string to_do) {
  return {Error::Kind::usage, std::move(what), {}, std::move(to_do)};
}

/// Empty when libsodium can't have the memory.
std::string hashed(const std::string& password) {
  char out[crypto_pwhash_STRBYTES];
  const int failed = crypto_pwhash_str(out, password.data(), password.size(), crypto_pwhash_OPSLIMIT_INTERACTIVE,
                                       crypto_pwhash_MEMLIMIT_INTERACTIVE);
  return failed == 0 ? std::string(out) : std::string();
}

std::string fingerprint(const std::string& password_hash) {
  return password_hash.empty() ? std::string("none") : hex(sha256(password_hash));
}

std::string value(const ActRecord& act, const std::string& key) {
  const auto found = act.values.find(key);
  return found == act.values.end() ? std::string() : found->second;
}

std::optional<Error> fault_of(Database& database, const PersonChange& change, const std::optional<PersonNow>& before) {
  if (change.name.empty()) return usage("the person has no name", "write it in quotes");
  if (change.role != operator_role && change.role != engineer_role)
    return usage(fmt::format("\"{}\" is no role", change.role), "write operator or engineer");
  if (change.password && change.password->size() < shortest_password)
    return usage(fmt::format("the password has fewer than {} characters", shortest_password), "choose a longer one");
  if (change.role == engineer_role && !change.gone && !change.password && (!before || before->password.empty()))
    return usage("an engineer needs a password", "give one");
  const auto bearer = change.badge.empty() || change.gone ? std::nullopt : person_of_badge(database, change.badge);
  if (bearer && bearer->name != change.name)
    return usage(fmt::format("{} bears this badge", bearer->name), "give each person a badge of their own");
  return std::nullopt;
}

}  // namespace

Result<Done> change_person(Database& database, UuidMaker& uuids, const PersonChange& change) {
  const std::string hash = change.password ? hashed(*change.password) : std::string();
  Transaction transaction(database, Transaction::Kind::write);
  const auto before = person_of(database, change.name);
  if (const auto fault = fault_of(database, change, before)) return *fault;
  if (change.password && hash.empty()) return usage("the password can't be hashed: no memory", "free some memory");
  const std::string kept = change.password ? hash : before ? before->password : std::string();
  ActRecord act;
  act.kind = "person";
  act.about = change.name;
  act.at_us = change.at_us;
  act.station = change.station;
  act.who = change.by;
  act.reason = change.gone ? "leaves" : change.role;
  act.values = {
      {"role", change.role}, {"badge", change.gone ? std::string() : change.badge}, {"password", fingerprint(kept)}};
  act.values["gone"] = change.gone ? "yes" : "no";
  add_act(database, uuids, act);
  if (change.password) database.run("UPDATE credential SET password = ? WHERE name = ?", hash, change.name);
  return transaction.commit();
}

std::vector<PersonNow> all_people(Database& database) {
  std::vector<PersonNow> out;
  Query q = database.query("SELECT name, role, badge, password, gone FROM credential ORDER BY name");
  while (q.next()) out.push_back(person(q));
  return out;
}

std::optional<PersonNow> person_of(Database& database, const std::string& name) {
  Query q = database.query("SELECT name, role, badge, password, gone FROM credential WHERE name = ?", name);
  return q.next() ? std::optional(person(q)) : std::nullopt;
}

std::optional<PersonNow> person_of_badge(Database& database, const std::string& badge) {
  Query q = database.query("SELECT name, role, badge, password, gone FROM credential WHERE badge = ?", badge);
  return q.next() ? std::optional(person(q)) : std::nullopt;
}

bool has_engineers(Database& database) {
  return database.first("SELECT 1 FROM credential WHERE role = 'engineer' AND gone = 0").has_value();
}

bool password_fits(const PersonNow& person, const std::string& password) {
  return !person.gone && !person.password.empty() &&
         crypto_pwhash_str_verify(person.password.c_str(), password.data(), password.size()) == 0;
}

bool is_as_recorded(Database& database, const PersonNow& held) {
  const auto act = last_act(database, "person", held.name);
  if (!act) return false;
  const bool password = held.password.empty() || fingerprint(held.password) == value(*act, "password");
  return password && value(*act, "role") == held.role && value(*act, "badge") == held.badge &&
         (value(*act, "gone") == "yes") == held.gone;
}

void settle_person(Database& database, std::string_view act_uuid) {
  std::string name;
  {
    Query q = database.query("SELECT about FROM act WHERE uuid = ? AND kind = 'person'", Blob{act_uuid});
    if (!q.next()) return;
    name = q.text(0);
  }
  const auto act = last_act(database, "person", name);
  if (!act) return;
  const std::string badge = value(*act, "badge");
  database.run(
      "INSERT INTO credential(name, role, badge, gone) VALUES(?, ?, ?, ?) ON CONFLICT(name) DO UPDATE SET "
      "role = excluded.role, badge = excluded.badge, gone = excluded.gone",
      name, value(*act, "role"), badge.empty() ? std::nullopt : std::optional(badge), value(*act, "gone") == "yes");
}

}  // namespace jigwright
