#include "db/line_questions.hpp"

#include <set>

#include "db/act.hpp"
#include "db/boards.hpp"
#include "db/digest.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

void take(Query q, std::set<std::string>& serials) {
  while (q.next()) serials.insert(q.text(0));
}

/// Boards of the order that a hold has named or takes in: few, where most boards of an order were never held.
std::set<std::string> perhaps_held(Database& database, const std::string& order) {
  std::set<std::string> out;
  take(database.query("SELECT b.serial FROM act a JOIN act_board x ON x.act = a.id JOIN build d ON d.board = x.board "
                      "JOIN product_order o ON o.id = d.ord JOIN board b ON b.id = d.board WHERE a.kind = 'hold' AND "
                      "o.name = ?",
                      order),
       out);
  for (const ActRecord& rule : rules_in_force(database)) {
    const std::string& by = rule.values.at("by");
    BoardChoice choice;
    choice.order = order;
    if (by == "order" && rule.values.at("name") != order) continue;
    if (by == "reel") choice.reel = rule.values.at("name");
    if (by == "lot") choice.lot = rule.values.at("name");
    const auto chosen = chosen_boards(database, choice);
    if (chosen) out.insert(chosen.value().begin(), chosen.value().end());
  }
  return out;
}

}  // namespace

Result<OrderCounts> order_counts(Database& database, const std::string& order) {
  Transaction reading(database, Transaction::Kind::read);
  OrderCounts out;
  {
    Query q = database.query(
        "SELECT count(*), count(t.id), sum(t.judgement = 0), sum(t.judgement = 2), sum((SELECT n.judgement FROM trial "
        "n "
        "WHERE n.board = d.board ORDER BY n.id DESC LIMIT 1) = 0 AND t.judgement <> 0) FROM product_order o "
        "JOIN build d ON d.ord = o.id LEFT JOIN trial t ON t.board = d.board AND t.counts = 1 WHERE o.name = ?",
        order);
    if (q.next()) out = {q.integer(0), q.integer(1), q.integer(2), q.integer(4), 0, q.integer(3)};
  }
  for (const std::string& serial : perhaps_held(database, order)) {
    const BoardNow board = read_board_now(database, serial);
    if (board.build_no && board.order == order && !board.holds.empty()) ++out.held;
  }
  if (const auto done = reading.commit(); !done) return done.error();
  return out;
}

Result<bool> is_reel(Database& database, const std::string& label) {
  Transaction reading(database, Transaction::Kind::read);
  const bool out = database.first("SELECT 1 FROM reel WHERE name = ?", label).has_value();
  if (const auto done = reading.commit(); !done) return done.error();
  return out;
}

Result<std::optional<std::int64_t>> unapproved_boards(Database& database, const std::string& order,
                                                      const RevisionFiles& files) {
  Transaction reading(database, Transaction::Kind::read);
  const std::string plan = hex(sha256(files.plan)), jig = hex(sha256(files.jig)), limits = hex(sha256(files.limits));
  const auto approved = database.first(
      "SELECT 1 FROM act a JOIN act_value p ON p.act = a.id AND p.key = 'plan' JOIN act_value j ON j.act = a.id AND "
      "j.key = 'jig' JOIN act_value l ON l.act = a.id AND l.key = 'limits' WHERE a.kind = 'approve' AND a.about = ? "
      "AND "
      "p.value = ? AND j.value = ? AND l.value = ?",
      order, plan, jig, limits);
  std::optional<std::int64_t> out;
  if (!approved)
    out = database
              .first(
                  "SELECT count(DISTINCT t.board) FROM product_order o JOIN trial t ON t.ord = o.id WHERE o.name = ? "
                  "AND t.purpose = 0 AND t.setup IN (SELECT s.setup FROM setup_document s JOIN document d ON "
                  "d.id = s.document WHERE d.sha256 IN (?, ?, ?) GROUP BY s.setup HAVING count(*) = 3)",
                  order, Blob{sha256(files.plan)}, Blob{sha256(files.jig)}, Blob{sha256(files.limits)})
              .value_or(0);
  if (const auto done = reading.commit(); !done) return done.error();
  return out;
}

Result<std::string> stop_in_force(Database& database, const std::string& station) {
  Transaction reading(database, Transaction::Kind::read);
  std::string out;
  {
    Query q = database.query(
        "SELECT a.kind, a.reason FROM act a JOIN station s ON s.id = a.station WHERE a.kind IN ('stop', 'go-on') AND "
        "s.name = ? ORDER BY a.id DESC LIMIT 1",
        station);
    if (q.next() && q.text(0) == "stop") out = q.text(1);
  }
  if (const auto done = reading.commit(); !done) return done.error();
  return out;
}

}  // namespace jigwright
