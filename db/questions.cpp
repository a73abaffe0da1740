#include "db/questions.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <map>
#include <unordered_map>

#include "db/names.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

/// Letters, then the number: "U7" before "U10".
bool counts_before(const std::string& a, const std::string& b) {
  const auto digits_a = std::min(a.find_first_of("0123456789"), a.size());
  const auto digits_b = std::min(b.find_first_of("0123456789"), b.size());
  const int letters = a.compare(0, digits_a, b, 0, digits_b);
  if (letters != 0) return letters < 0;
  if (a.size() != b.size()) return a.size() < b.size();
  return a < b;
}

Error unknown(Database& database, const std::string& what, const std::optional<std::string>& near) {
  return {Error::Kind::usage, what, database.path(), near ? fmt::format("did you mean \"{}\"?", *near) : ""};
}

Error unknown_serial(Database& database, const std::string& serial) {
  if (database.first("SELECT 1 FROM reel WHERE name = ?", serial))
    return {Error::Kind::usage, fmt::format("\"{}\" is a reel, not a serial", serial), database.path(),
            "ask for it as a reel"};
  return unknown(database, fmt::format("unknown serial \"{}\"", serial), nearest_serial(database, serial));
}

Error unknown_reel(Database& database, const std::string& reel) {
  if (database.first("SELECT 1 FROM board WHERE serial = ?", reel))
    return {Error::Kind::usage, fmt::format("\"{}\" is a board's serial, not a reel", reel), database.path(),
            "ask for it as a serial"};
  return unknown(database, fmt::format("unknown reel \"{}\"", reel), nearest_reel(database, reel));
}

// Columns of ReelFacts and BoardPlace, in the order that reel_facts() and board_place() read them.
ReelFacts reel_facts(const Query& q, int at) {
  ReelFacts out{q.text(at),
                q.text(at + 1),
                q.text(at + 2),
                q.text(at + 3),
                q.text(at + 4),
                q.text(at + 5),
                q.text(at + 6),
                {},
                q.maybe_integer(at + 8)};
  if (!q.null(at + 7)) out.rereeled = q.integer(at + 7) != 0;
  return out;
}

BoardPlace board_place(const Query& q, int at) {
  BoardPlace out{q.text(at), q.text(at + 1), q.text(at + 2), q.text(at + 3), q.maybe_integer(at + 4), {}, {}, 0};
  if (!q.null(at + 5)) out.judgement = static_cast<Judgement>(q.integer(at + 5));
  out.at_us = q.maybe_integer(at + 6);
  out.trials = q.integer(at + 7);
  return out;
}

std::optional<BoardPlace> find_board(Database& database, const std::string& serial) {
  Query q = database.query(
      "SELECT b.serial, o.name, o.product, d.panel, d.build_no, t.judgement, t.at_us, "
      "(SELECT count(*) FROM trial n WHERE n.board = b.id) FROM board b LEFT JOIN build d ON d.board = b.id "
      "LEFT JOIN product_order o ON o.id = d.ord LEFT JOIN trial t ON t.board = b.id AND t.counts = 1 "
      "WHERE b.serial = ?",
      serial);
  return q.next() ? std::optional(board_place(q, 0)) : std::nullopt;
}

/// The same reel twice at one designator (two windows that meet) is one answer, certain if either is.
void merge(std::vector<Carried>& reels, Carried next) {
  for (Carried& held : reels)
    if (held.designator == next.designator && held.reel.reel == next.reel.reel) {
      held.certain = held.certain || next.certain;
      return;
    }
  reels.push_back(std::move(next));
}

std::vector<Carried> reels_on(Database& database, const std::string& serial) {
  std::vector<Carried> out;
  Query q = database.query(
      "SELECT c.designator, c.how = 'certain', r.name, l.maker, l.part, l.lot, r.date_code, r.distributor, r.marking, "
      "r.rereeled, r.quantity FROM carries c JOIN reel r ON r.id = c.reel_id JOIN lot l ON l.id = r.lot "
      "WHERE c.serial = ?",
      serial);
  while (q.next()) merge(out, {q.text(0), reel_facts(q, 2), q.integer(1) != 0});
  std::stable_sort(out.begin(), out.end(), [](const Carried& a, const Carried& b) {
    if (a.designator != b.designator) return counts_before(a.designator, b.designator);
    if (a.certain != b.certain) return a.certain;
    return a.reel.reel < b.reel.reel;
  });
  return out;
}

std::optional<ReelFacts> find_reel(Database& database, const std::string& reel) {
  Query q = database.query(
      "SELECT r.name, l.maker, l.part, l.lot, r.date_code, r.distributor, r.marking, r.rereeled, r.quantity "
      "FROM reel r JOIN lot l ON l.id = r.lot WHERE r.name = ?",
      reel);
  return q.next() ? std::optional(reel_facts(q, 0)) : std::nullopt;
}

void add_place(Carrier& carrier, const std::string& designator, bool certain) {
  carrier.certain = carrier.certain || certain;
  auto& held = carrier.designators;
  if (std::find(held.begin(), held.end(), designator) == held.end()) held.push_back(designator);
}

void sort_carriers(std::vector<Carrier>& carriers) {
  for (Carrier& c : carriers) std::sort(c.designators.begin(), c.designators.end(), counts_before);
  std::stable_sort(carriers.begin(), carriers.end(), [](const Carrier& a, const Carrier& b) {
    return std::tie(a.board.order, a.board.build_no) < std::tie(b.board.order, b.board.build_no);
  });
}

std::vector<Carrier> boards_with(Database& database, const std::string& reel) {
  std::vector<Carrier> out;
  std::unordered_map<std::int64_t, std::size_t> at;
  Query q = database.query(
      "SELECT c.board_id, c.designator, c.how = 'certain', c.serial, o.name, o.product, d.panel, d.build_no, "
      "t.judgement, t.at_us, (SELECT count(*) FROM trial n WHERE n.board = c.board_id) FROM carries c "
      "JOIN build d ON d.board = c.board_id JOIN product_order o ON o.id = d.ord "
      "LEFT JOIN trial t ON t.board = c.board_id AND t.counts = 1 WHERE c.reel = ?",
      reel);
  while (q.next()) {
    const auto [held, fresh] = at.try_emplace(q.integer(0), out.size());
    if (fresh) out.push_back({board_place(q, 3), {}, false});
    add_place(out[held->second], q.text(1), q.integer(2) != 0);
  }
  sort_carriers(out);
  return out;
}

Metric shown_metric(const Query& q, int at) {
  Metric out;
  out.name = {q.text(at), q.text(at + 1), q.text(at + 2)};
  const auto unit = unit_of(q.text(at + 3));
  if (unit) out.unit = unit.value();
  out.about = static_cast<About>(q.integer(at + 4));
  return out;
}

std::optional<Limit> shown_limit(const Query& q, int at) {
  if (q.null(at)) return std::nullopt;  // guard: no row of applied_limit
  Limit out;
  out.guard = static_cast<Guard>(q.integer(at));
  out.specification = {q.maybe_real(at + 1), q.maybe_real(at + 2)};
  out.nominal = q.real(at + 3);
  out.share = q.real(at + 4);
  out.budget_U = q.real(at + 5);
  out.budget_of_reading = q.real(at + 6);
  out.width = q.real(at + 7);
  out.applied = {q.maybe_real(at + 8), q.maybe_real(at + 9)};
  out.reason = q.text(at + 10);
  return out;
}

ShownFinding shown_finding(const Query& q) {
  ShownFinding out;
  out.metric = shown_metric(q, 0);
  out.limit = shown_limit(q, 5);
  Finding& f = out.judged.finding;
  f.value = q.real(16);
  f.u = q.real(17);
  f.n = static_cast<int>(q.integer(18));
  f.state = static_cast<FindingState>(q.integer(19));
  out.judged.verdict = static_cast<Verdict>(q.integer(20));
  if (out.limit && f.state == FindingState::measured) out.judged.margin = margin(*out.limit, f.value);
  return out;
}

std::vector<ShownFinding> findings_of(Database& database, std::int64_t trial) {
  std::vector<ShownFinding> out;
  Query q = database.query(
      "SELECT m.step, m.name, m.variant, m.unit, m.about, l.guard, l.spec_low, l.spec_high, l.nominal, l.share, "
      "l.u_budget, l.u_of_reading, l.width, l.low, l.high, l.reason, x.value, x.u, x.n, x.state, x.verdict "
      "FROM finding x JOIN trial t ON t.id = x.trial JOIN metric m ON m.id = x.metric "
      "LEFT JOIN applied_limit l ON l.applied = t.applied AND l.metric = x.metric WHERE x.trial = ? ORDER BY x.metric",
      trial);
  while (q.next()) out.push_back(shown_finding(q));
  auto rank = [](const ShownFinding& f) {
    return std::isnan(f.judged.margin) ? std::numeric_limits<double>::infinity() : f.judged.margin;
  };
  std::stable_sort(out.begin(), out.end(),
                   [&](const ShownFinding& a, const ShownFinding& b) { return rank(a) < rank(b); });
  return out;
}

ShownTrial shown_trial(const Query& q) {
  ShownTrial out;
  out.uuid = uuid_from_bytes(q.text(1)).value_or(Uuid{});
  out.attempt = static_cast<int>(q.integer(2));
  out.counts = q.integer(3) != 0;
  out.open = q.integer(4) == 0;
  out.origin = static_cast<Origin>(q.integer(5));
  out.at_us = q.integer(6);
  out.took_ms = q.maybe_integer(7);
  out.operator_name = q.text(8);
  out.station = q.text(9);
  out.nest = static_cast<int>(q.integer(10));
  out.program = q.text(11);
  out.plan = q.text(12);
  out.limit_set = q.text(13);
  out.limit_revision = q.integer(14);
  out.depth = q.text(15);
  out.judgement = static_cast<Judgement>(q.integer(16));
  out.void_reason = q.text(17);
  out.unsafe = q.text(18);
  out.ambient_C = q.maybe_real(19);
  out.missed = static_cast<int>(q.integer(20));
  out.adopted = q.maybe_integer(24);
  if (!q.null(21)) out.deciding = label({q.text(21), q.text(22), q.text(23)});
  return out;
}

std::vector<ShownTrial> trials_of(Database& database, const std::string& serial) {
  std::vector<ShownTrial> out;
  std::vector<std::int64_t> ids;
  Query q = database.query(
      "SELECT t.id, t.uuid, t.attempt, t.counts, t.state, t.origin, t.at_us, t.took_ms, p.name, s.name, t.nest, "
      "u.program, u.plan, v.limit_set, v.number, t.depth, t.judgement, t.void_reason, t.unsafe, t.ambient_degC, "
      "t.nogo, m.step, m.name, m.variant, t.adopted FROM board b JOIN trial t ON t.board = b.id "
      "JOIN station s ON s.id = t.station JOIN setup u ON u.id = t.setup JOIN revision v ON v.id = t.revision "
      "LEFT JOIN person p ON p.id = t.operator LEFT JOIN metric m ON m.id = t.deciding_metric "
      "WHERE b.serial = ? ORDER BY t.id",
      serial);
  while (q.next()) {
    ids.push_back(q.integer(0));
    out.push_back(shown_trial(q));
  }
  for (std::size_t i = 0; i < ids.size(); ++i) out[i].findings = findings_of(database, ids[i]);
  return out;
}

}  // namespace

Result<SerialTrace> trace_serial(Database& database, const std::string& serial) {
  Transaction transaction(database, Transaction::Kind::read);
  const auto board = find_board(database, serial);
  if (database.failed()) return database.error();
  if (!board) return unknown_serial(database, serial);
  return database.result(SerialTrace{*board, reels_on(database, serial)});
}

Result<ReelTrace> trace_reel(Database& database, const std::string& reel) {
  Transaction transaction(database, Transaction::Kind::read);
  const auto facts = find_reel(database, reel);
  if (database.failed()) return database.error();
  if (!facts) return unknown_reel(database, reel);
  return database.result(ReelTrace{*facts, boards_with(database, reel)});
}

Result<BoardShown> show_board(Database& database, const std::string& serial) {
  Transaction transaction(database, Transaction::Kind::read);
  const auto board = find_board(database, serial);
  if (database.failed()) return database.error();
  if (!board) return unknown_serial(database, serial);
  return database.result(BoardShown{*board, trials_of(database, serial)});
}

}  // namespace jigwright
