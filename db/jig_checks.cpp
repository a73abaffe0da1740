#include "db/jig_checks.hpp"

#include "db/sqlite.hpp"

namespace jigwright {
namespace {

std::vector<std::string> unproved_boards(Database& database, const std::string& station) {
  std::vector<std::string> out;
  Query q = database.query(
      "SELECT b.serial FROM trial t JOIN station s ON s.id = t.station JOIN board b ON b.id = t.board WHERE s.name = "
      "?1 "
      "AND t.purpose = 0 AND t.id > coalesce((SELECT a.after_trial FROM act a JOIN station c ON c.id = a.station JOIN "
      "act_value v ON v.act = a.id AND v.key = 'result' WHERE a.kind = 'jig-check' AND c.name = ?1 AND v.value IN "
      "('ok', 'failed') ORDER BY a.id DESC LIMIT 1), 0) GROUP BY b.id ORDER BY min(t.id)",
      station);
  while (q.next()) out.push_back(q.text(0));
  return out;
}

}  // namespace

Result<std::vector<std::string>> write_jig_check(Database& database, UuidMaker& uuids, const ActRecord& check,
                                                 const std::string& hold_reason) {
  Transaction transaction(database, Transaction::Kind::write);
  std::vector<std::string> held;
  const auto result = check.values.find("result");
  if (result != check.values.end() && result->second == "failed") held = unproved_boards(database, check.station);
  add_act(database, uuids, check);
  if (!held.empty()) {
    ActRecord hold;
    hold.kind = "hold";
    hold.at_us = check.at_us;
    hold.station = check.station;
    hold.who = check.who;
    hold.reason = hold_reason;
    hold.about = "jig-check";
    hold.boards = held;
    add_act(database, uuids, hold);
  }
  if (const auto done = transaction.commit(); !done) return done.error();
  return held;
}

}  // namespace jigwright
