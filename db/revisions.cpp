#include "db/revisions.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <charconv>
#include <tuple>

#include "db/digest.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

using Id = std::int64_t;

std::string value(const ActRecord& act, const std::string& key) {
  const auto found = act.values.find(key);
  return found == act.values.end() ? std::string() : found->second;
}

Adopted adopted(const ActRecord& act) {
  Adopted out;
  const std::string number = value(act, "number");
  std::from_chars(number.data(), number.data() + number.size(), out.number);
  out.order = act.about;
  out.plan = value(act, "plan");
  out.jig = value(act, "jig");
  out.limits = value(act, "limits");
  out.parent = value(act, "parent");
  out.authority = value(act, "authority");
  out.earlier_stand = value(act, "earlier trials") != "again";
  out.who = act.who;
  out.second = act.second;
  out.reason = act.reason;
  out.at_us = act.at_us;
  out.uuid = act.uuid;
  return out;
}

void keep_document(Database& database, const std::string& kind, const std::string& text) {
  database.run("INSERT OR IGNORE INTO document(sha256, kind, name, body) VALUES(?, ?, ?, ?)", Blob{sha256(text)}, kind,
               kind + ".toml", text);
}

/// The hash of the set-up's document of a kind, in hex digits.
std::string document_of(Database& database, Id setup, const char* kind) {
  Query q = database.query(
      "SELECT d.sha256 FROM setup_document s JOIN document d ON d.id = s.document WHERE s.setup = ? AND d.kind = ?",
      setup, kind);
  return q.next() ? hex(q.text(0)) : std::string();
}

/// The revisions that came into force for the order, one after the other: those for every order, until it had its own.
std::vector<Adopted> adopted_in_turn(Database& database, const std::string& order) {
  std::vector<Adopted> out;
  bool own = false;
  for (Adopted& a : all_adopted(database)) {
    const bool for_order = !a.order.empty() && a.order == order;
    own = own || for_order;
    if (for_order || (a.order.empty() && !own)) out.push_back(std::move(a));
  }
  return out;
}

}  // namespace

std::vector<Adopted> all_adopted(Database& database) {
  std::vector<Adopted> out;
  for (const ActRecord& act : acts_of(database, "adopt")) out.push_back(adopted(act));
  return out;
}

std::optional<Adopted> adopted_for(Database& database, const std::string& order) {
  auto all = adopted_in_turn(database, order);
  return all.empty() ? std::nullopt : std::optional(std::move(all.back()));
}

Result<Adopted> adopt(Database& database, UuidMaker& uuids, const Adopting& adopting) {
  Transaction transaction(database, Transaction::Kind::write);
  const auto before = adopted_for(database, adopting.order);
  const bool same_scope = before && before->order == adopting.order;
  if (same_scope && differing(*before, adopting.files).empty())
    return Error{Error::Kind::usage,
                 fmt::format("these files are in force already, as revision {}", before->number),
                 {},
                 "nothing was changed"};
  const auto all = all_adopted(database);
  ActRecord act;
  act.kind = "adopt";
  act.at_us = adopting.at_us;
  act.station = adopting.station;
  act.who = adopting.who;
  act.second = adopting.second;
  act.reason = adopting.reason;
  act.about = adopting.order;
  act.values["number"] = fmt::format("{}", all.empty() ? 1 : all.back().number + 1);
  act.values["plan"] = hex(sha256(adopting.files.plan));
  act.values["jig"] = hex(sha256(adopting.files.jig));
  act.values["limits"] = hex(sha256(adopting.files.limits));
  act.values["authority"] = adopting.station;
  act.values["earlier trials"] = adopting.earlier_stand ? "stand" : "again";
  if (before) act.values["parent"] = text(before->uuid);
  keep_document(database, "plan", adopting.files.plan);
  keep_document(database, "jig", adopting.files.jig);
  keep_document(database, "limits", adopting.files.limits);
  act.uuid = add_act(database, uuids, act);
  if (const auto done = transaction.commit(); !done) return done.error();
  return adopted(act);
}

bool is_withdrawn(Database& database, const std::string& order, std::optional<std::int64_t> adopted, Id setup) {
  const auto revisions = adopted_in_turn(database, order);
  if (revisions.empty()) return false;
  const auto files_of = [&](const Adopted& a) { return std::tie(a.plan, a.jig, a.limits); };
  const auto plan = document_of(database, setup, "plan"), jig = document_of(database, setup, "jig"),
             limits = document_of(database, setup, "limits");
  const auto played = [&](const Adopted& a) { return files_of(a) == std::tie(plan, jig, limits); };
  if (adopted == 0) return !played(revisions.back());
  const auto last = std::find_if(revisions.rbegin(), revisions.rend(),
                                 [&](const Adopted& a) { return a.number > adopted.value_or(0) && !a.earlier_stand; });
  return last != revisions.rend() && std::none_of(revisions.rbegin(), last + 1, played);
}

std::string differing(const Adopted& adopted, const RevisionFiles& files) {
  std::vector<std::string> names;
  if (adopted.plan != hex(sha256(files.plan))) names.emplace_back("plan");
  if (adopted.jig != hex(sha256(files.jig))) names.emplace_back("jig");
  if (adopted.limits != hex(sha256(files.limits))) names.emplace_back("limits");
  return fmt::format("{}", fmt::join(names, " and "));
}

}  // namespace jigwright
