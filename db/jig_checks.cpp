#include "db/jig_checks.hpp"

#include "db/sqlite.hpp"

namespace jigwright {
namespace {

/// By the station's chain, whatever the clock said: boards of trials recorded behind its last check that came to a
/// word.
std::vector<std::string> unproved_boards(Database& database, const std::string& station) {
  const auto at = database.first("SELECT id FROM station WHERE name = ?", station);
  std::int64_t epoch = 0, seq = 0;
  {
    Query q = database.query(
        "SELECT j.epoch, j.seq FROM journal j JOIN act a ON a.uuid = j.uuid JOIN act_value v ON v.act = a.id AND "
        "v.key = 'result' WHERE j.station = ? AND j.kind = 7 AND a.kind = 'jig-check' AND v.value IN ('ok', 'failed') "
        "ORDER BY j.epoch DESC, j.seq DESC LIMIT 1",
        at);
    if (q.next()) {
      epoch = q.integer(0);
      seq = q.integer(1);
    }
  }
  std::vector<std::string> out;
  Query q = database.query(
      "SELECT b.serial FROM journal j JOIN trial t ON t.uuid = j.uuid JOIN board b ON b.id = t.board "
      "WHERE j.station = ? AND (j.epoch, j.seq) > (?, ?) AND j.kind = 4 AND t.purpose = 0 GROUP BY b.id "
      "ORDER BY min(t.id)",
      at, epoch, seq);
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
