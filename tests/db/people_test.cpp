#include "db/people.hpp"

#include "db/audit.hpp"
#include "db/digest.hpp"
#include "db/sqlite.hpp"
#include "tests/db/desk.hpp"

using namespace jigwright;
using room::must;

namespace {

struct Office {
  std::unique_ptr<Store> store = room::memory();

  Database& db() { return store->database(); }
  Result<Done> change(const PersonChange& change) { return change_person(db(), store->uuids(), change); }
  static PersonChange person(const std::string& name, std::string_view role, const std::string& badge = {},
                             std::optional<std::string> password = {}) {
    PersonChange out;
    out.name = name;
    out.role = role;
    out.badge = badge;
    out.password = std::move(password);
    out.by = "B. Boss";
    out.station = "office";
    out.at_us = room::noon_us;
    return out;
  }
  void add(const PersonChange& change) { must(this->change(change)); }
  std::string refusal(const PersonChange& wanted) {
    const auto done = change(wanted);
    REQUIRE(!done.ok());
    CHECK(done.error().kind == Error::Kind::usage);
    return done.error().what;
  }
  std::string differences() {
    std::string out;
    for (const Difference& d : must(audit(db())).differences) out += d.what + "\n";
    return out;
  }
};

}  // namespace

TEST_CASE("an operator has a badge and no password; an engineer has a password") {
  Office o;
  CHECK(!has_engineers(o.db()));
  o.add(Office::person("Ann", operator_role, "B-1"));
  CHECK(!has_engineers(o.db()));
  o.add(Office::person("Eve", engineer_role, "B-2", "tall trees"));
  CHECK(has_engineers(o.db()));
  const auto ann = person_of(o.db(), "Ann");
  REQUIRE(ann.has_value());
  CHECK(ann->role == "operator");
  CHECK(ann->badge == "B-1");
  CHECK(ann->password.empty());
  CHECK(!password_fits(*ann, ""));
  CHECK(person_of_badge(o.db(), "B-2")->name == "Eve");
  CHECK(!person_of_badge(o.db(), "B-3"));
  CHECK(!person_of_badge(o.db(), ""));
  CHECK(!person_of(o.db(), "ann"));
  CHECK(all_people(o.db()).size() == 2);
  CHECK(o.differences().empty());
}

TEST_CASE("only the right password fits, to the letter") {
  Office o;
  o.add(Office::person("Eve", engineer_role, "", "tall trees"));
  const PersonNow eve = *person_of(o.db(), "Eve");
  CHECK(password_fits(eve, "tall trees"));
  for (const char* wrong : {"", "tall tree", "tall trees ", "Tall trees", "tall\0trees"})
    CHECK(!password_fits(eve, wrong));
}

TEST_CASE("what can't be registered is refused in a sentence, and leaves no record") {
  Office o;
  o.add(Office::person("Ann", operator_role, "B-1"));
  CHECK(o.refusal(Office::person("", operator_role)) == "the person has no name");
  CHECK(o.refusal(Office::person("Bob", "boss")) == "\"boss\" is no role");
  CHECK(o.refusal(Office::person("Bob", operator_role, "B-1")) == "Ann bears this badge");
  CHECK(o.refusal(Office::person("Eve", engineer_role)) == "an engineer needs a password");
  CHECK(o.refusal(Office::person("Eve", engineer_role, "", "1234567")) == "the password has fewer than 8 characters");
  CHECK(o.refusal(Office::person("Ann", engineer_role, "B-1")) == "an engineer needs a password");
  CHECK(acts_of(o.db(), "person").size() == 1);
  CHECK(all_people(o.db()).size() == 1);
  o.add(Office::person("Eve", engineer_role, "", "12345678"));
}

TEST_CASE("a change keeps the password that it does not name, and a new one replaces it") {
  Office o;
  o.add(Office::person("Eve", engineer_role, "", "tall trees"));
  o.add(Office::person("Eve", engineer_role, "B-7"));
  CHECK(password_fits(*person_of(o.db(), "Eve"), "tall trees"));
  CHECK(person_of(o.db(), "Eve")->badge == "B-7");
  o.add(Office::person("Eve", engineer_role, "B-7", "low clouds"));
  CHECK(!password_fits(*person_of(o.db(), "Eve"), "tall trees"));
  CHECK(password_fits(*person_of(o.db(), "Eve"), "low clouds"));
  CHECK(o.differences().empty());
}

TEST_CASE("who is gone may do nothing, and gives the badge back") {
  // The badge stayed with who had left: it could be given to nobody else.
  Office o;
  o.add(Office::person("Eve", engineer_role, "B-2", "tall trees"));
  PersonChange leaves = Office::person("Eve", engineer_role, "B-2");
  leaves.gone = true;
  o.add(leaves);
  CHECK(person_of(o.db(), "Eve")->gone);
  CHECK(!password_fits(*person_of(o.db(), "Eve"), "tall trees"));
  CHECK(!has_engineers(o.db()));
  CHECK(!person_of_badge(o.db(), "B-2"));
  o.add(Office::person("Ann", operator_role, "B-2"));
  CHECK(person_of_badge(o.db(), "B-2")->name == "Ann");
  CHECK(last_act(o.db(), "person", "Eve")->reason == "leaves");
  CHECK(o.differences().empty());
}

TEST_CASE("no record holds the password: a fingerprint of its hash, or none") {
  Office o;
  o.add(Office::person("Eve", engineer_role, "", "tall trees"));
  o.add(Office::person("Ann", operator_role, "B-1"));
  const auto acts = acts_of(o.db(), "person");
  REQUIRE(acts.size() == 2);
  CHECK(acts[0].who == "B. Boss");
  CHECK(acts[0].values.at("password") == hex(sha256(person_of(o.db(), "Eve")->password)));
  CHECK(acts[0].values.at("role") == "engineer");
  CHECK(acts[0].values.at("gone") == "no");
  CHECK(acts[1].values.at("password") == "none");
}

TEST_CASE("a password hashed by another program fits") {
  // The reference implementation of RFC 9106 (Debian 12's package argon2, 0~20171227):
  //   printf 'tall trees' | argon2 saltsaltsaltsalt -id -t 2 -m 16 -p 1 -l 32 -e
  PersonNow eve{"Eve", "engineer", "",
                "$argon2id$v=19$m=65536,t=2,p=1$c2FsdHNhbHRzYWx0c2FsdA$SobOyqwdpnx3i7nms61oqjktb7Qi2CJM+DfPz3heDoA",
                false};
  CHECK(password_fits(eve, "tall trees"));
  CHECK(!password_fits(eve, "tall treez"));
  eve.gone = true;
  CHECK(!password_fits(eve, "tall trees"));
}

TEST_CASE("what is no hash fits no password") {
  for (const char* hash : {"", "tall trees", "$argon2id$", "$argon2id$v=19$m=65536,t=2,p=1$$"}) {
    const PersonNow eve{"Eve", "engineer", "", hash, false};
    CHECK(!password_fits(eve, "tall trees"));
    CHECK(!password_fits(eve, ""));
  }
}

TEST_CASE("rights changed by plain SQL are told by the audit") {
  for (const char* sql :
       {"UPDATE credential SET role = 'engineer' WHERE name = 'Ann'",
        "UPDATE credential SET badge = 'B-9' WHERE name = 'Ann'",
        "UPDATE credential SET badge = NULL WHERE name = 'Ann'", "UPDATE credential SET gone = 0 WHERE name = 'Old'",
        "UPDATE credential SET gone = 1 WHERE name = 'Ann'",
        "UPDATE credential SET password = (SELECT password FROM credential WHERE name = 'Eve') WHERE name = 'Ann'",
        "UPDATE credential SET password = password || 'x' WHERE name = 'Eve'",
        "UPDATE credential SET name = 'Anna' WHERE name = 'Ann'"}) {
    Office o;
    o.add(Office::person("Ann", operator_role, "B-1"));
    o.add(Office::person("Eve", engineer_role, "B-2", "tall trees"));
    PersonChange old = Office::person("Old", operator_role);
    o.add(old);
    old.gone = true;
    o.add(old);
    REQUIRE(o.differences().empty());
    o.db().script(sql);
    CAPTURE(sql);
    CHECK(!o.differences().empty());
  }
}

TEST_CASE("a person taken out, or put in, behind the records is told") {
  Office o;
  o.add(Office::person("Ann", operator_role, "B-1"));
  o.db().script("INSERT INTO credential(name, role, badge, gone) VALUES('Mole', 'engineer', 'B-0', 0)");
  CHECK(o.differences().find("a person that no record names: \"Mole\"") != std::string::npos);
  o.db().script("DELETE FROM credential WHERE name = 'Mole'");
  REQUIRE(o.differences().empty());
  o.db().script("DELETE FROM credential WHERE name = 'Ann'");
  CHECK(!o.differences().empty());
}
