#include "db/boards.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <set>

#include "base/nearest.hpp"
#include "base/quantity.hpp"
#include "db/names.hpp"
#include "db/revisions.hpp"
#include "db/sqlite.hpp"
#include "db/week.hpp"

namespace jigwright {
namespace {

using Id = std::int64_t;
using Kind = BoardEvent::Kind;

std::optional<Kind> kind_of(const std::string& act) {
  if (act == "review") return Kind::reviewed;
  if (act == "repair") return Kind::repaired;
  if (act == "allow") return Kind::allowed;
  if (act == "scrap") return Kind::scrapped;
  if (act == "ship") return Kind::shipped;
  if (act == "return") return Kind::returned;
  return std::nullopt;
}

/// Events with the place of each among the board's trials, so that no clock decides. act 0: the trial itself.
struct Placed {
  Id attempts{}, act{};
  BoardEvent event;
};

void add_trials(Database& database, Id board, const std::string& order, std::vector<Placed>& out) {
  Query q = database.query(
      "SELECT attempt, uuid, judgement, setup, adopted FROM trial WHERE board = ? AND purpose = 0 ORDER BY attempt",
      board);
  while (q.next()) {
    BoardEvent event{Kind::tried, q.text(1), static_cast<Judgement>(q.integer(2)), false};
    event.withdrawn = is_withdrawn(database, order, q.maybe_integer(4), q.integer(3));
    out.push_back({q.integer(0), 0, event});
  }
}

void add_acts(Database& database, Id board, std::vector<Placed>& out) {
  Query q = database.query(
      "SELECT a.id, a.kind, x.attempts, a.trial FROM act_board x JOIN act a ON a.id = x.act WHERE x.board = ?", board);
  while (q.next())
    if (const auto kind = kind_of(q.text(1)))
      out.push_back({q.integer(2), q.integer(0), {*kind, q.text(3), Judgement::void_, false}});
}

/// "order", "reel", "lot": what else than its boards a hold takes in.
bool rule_takes_in(Database& database, Id hold, Id board) {
  std::string by, name;
  Query q = database.query("SELECT key, value FROM act_value WHERE act = ?", hold);
  while (q.next()) {
    if (q.text(0) == "by") by = q.text(1);
    if (q.text(0) == "name") name = q.text(1);
  }
  if (by == "order")
    return database
        .first(
            "SELECT 1 FROM build d JOIN product_order o ON o.id = d.ord WHERE d.board = ? AND o.name = ? UNION "
            "SELECT 1 FROM trial t JOIN product_order o ON o.id = t.ord WHERE t.board = ? AND o.name = ?",
            board, name, board, name)
        .has_value();
  if (by == "reel")
    return database.first("SELECT 1 FROM carries WHERE board_id = ? AND reel = ? LIMIT 1", board, name).has_value();
  if (by == "lot")
    return database
        .first(
            "SELECT 1 FROM carries c JOIN reel r ON r.id = c.reel_id JOIN lot l ON l.id = r.lot "
            "WHERE c.board_id = ? AND l.lot = ? LIMIT 1",
            board, name)
        .has_value();
  return false;
}

/// The first act that lifted the hold for the board: it names the board, or no board, or the hold's own rule.
std::optional<Placed> lifting(Database& database, const std::string& hold, Id board) {
  Query q = database.query(
      "SELECT coalesce(x.attempts, 0), a.id FROM act a LEFT JOIN act_board x ON x.act = a.id AND x.board = ? "
      "WHERE a.ends = ? AND a.kind IN ('release', 'waive') AND "
      "(x.act IS NOT NULL OR NOT EXISTS(SELECT 1 FROM act_board y WHERE y.act = a.id) OR "
      "EXISTS(SELECT 1 FROM act_value v WHERE v.act = a.id AND v.key = 'by')) ORDER BY a.id LIMIT 1",
      board, Blob{hold});
  if (!q.next()) return std::nullopt;
  return Placed{q.integer(0), q.integer(1), {Kind::lifted, hold, Judgement::void_, false}};
}

/// Holds and what lifted them, as events. A hold that takes the board in by its rule has no place among its trials: it
/// stands at their beginning.
void add_holds(Database& database, Id board, BoardNow& out, std::vector<Placed>& placed) {
  Query q = database.query(
      "SELECT a.id, a.uuid, a.who, a.reason, a.about, a.at_us, x.attempts FROM act a LEFT JOIN act_board x ON "
      "x.act = a.id AND x.board = ? WHERE a.kind = 'hold' ORDER BY a.id",
      board);
  while (q.next()) {
    if (q.null(6) && !rule_takes_in(database, q.integer(0), board)) continue;
    placed.push_back({q.integer(6), q.integer(0), {Kind::held, q.text(1), Judgement::void_, false}});
    if (auto lifted = lifting(database, q.text(1), board)) {
      lifted->attempts = std::max(lifted->attempts, q.integer(6));
      placed.push_back(*lifted);
    } else {
      out.holds.push_back({uuid_from_bytes(q.text(1)).value_or(Uuid{}), q.text(2), q.text(3), q.text(4), q.integer(5)});
    }
  }
}

/// The serial that a board bears now, when another label was put over it.
std::string current_serial(Database& database, const std::string& scanned) {
  Query q = database.query(
      "SELECT b.serial FROM act a JOIN act_board x ON x.act = a.id JOIN board b ON b.id = x.board "
      "WHERE a.kind = 'alias' AND a.about = ? ORDER BY a.id DESC LIMIT 1",
      scanned);
  return q.next() ? q.text(0) : scanned;
}

Error usage(std::string what, std::string to_do) {
  return {Error::Kind::usage, std::move(what), {}, std::move(to_do)};
}

}  // namespace

BoardNow read_board_now(Database& database, const std::string& serial) {
  BoardNow out;
  out.serial = current_serial(database, serial);
  if (out.serial != serial) out.scanned = serial;
  const auto board = database.first("SELECT id FROM board WHERE serial = ?", out.serial);
  if (!board) return out;
  {
    Query q = database.query(
        "SELECT o.name, o.product, d.build_no FROM board b LEFT JOIN build d ON d.board = b.id "
        "LEFT JOIN product_order o ON o.id = coalesce(d.ord, (SELECT t.ord FROM trial t WHERE t.board = b.id "
        "ORDER BY t.id DESC LIMIT 1)) WHERE b.id = ?",
        *board);
    if (q.next()) {
      out.order = q.text(0);
      out.product = q.text(1);
      out.build_no = q.maybe_integer(2);
    }
  }
  std::vector<Placed> placed;
  add_trials(database, *board, out.order, placed);
  add_acts(database, *board, placed);
  add_holds(database, *board, out, placed);
  std::stable_sort(placed.begin(), placed.end(), [](const Placed& a, const Placed& b) {
    return std::pair(a.attempts, a.act) < std::pair(b.attempts, b.act);
  });
  for (const Placed& p : placed) out.standing.add(p.event);
  out.known = out.build_no.has_value() || out.standing.trials() > 0;
  Query to = database.query(
      "SELECT a.about FROM act a JOIN act_board x ON x.act = a.id WHERE a.kind = 'ship' AND x.board = ? "
      "ORDER BY a.id DESC LIMIT 1",
      *board);
  if (to.next()) out.shipped_to = to.text(0);
  return out;
}

std::vector<ActRecord> rules_in_force(Database& database) {
  std::vector<ActRecord> out = acts_of(database, "hold");
  std::erase_if(out, [&](const ActRecord& hold) {
    return !hold.values.contains("by") ||
           database.first(
               "SELECT 1 FROM act a WHERE a.ends = ? AND (NOT EXISTS(SELECT 1 FROM act_board y WHERE y.act = a.id) OR "
               "EXISTS(SELECT 1 FROM act_value v WHERE v.act = a.id AND v.key = 'by'))",
               Blob{bytes(hold.uuid)});
  });
  return out;
}

Result<BoardNow> board_now(Database& database, const std::string& serial) {
  Transaction reading(database, Transaction::Kind::read);
  BoardNow out = read_board_now(database, serial);
  if (const auto done = reading.commit(); !done) return done.error();
  return out;
}

namespace {

/// "STEP.METRIC [VARIANT] > 0.2 mV".
struct Condition {
  std::string step, metric, variant;
  char than{'>'};
  bool magnitude{false};
  Quantity value;
};

std::string trimmed(std::string text) {
  while (!text.empty() && text.back() == ' ') text.pop_back();
  text.erase(0, text.find_first_not_of(' '));
  return text;
}

Result<Condition> read_condition(const std::string& text) {
  const auto bad = [&](const std::string& what) {
    return usage(fmt::format("the condition \"{}\" {}", printable(text), what),
                 "write it as in \"under-load.load_delta [1 nF] > 0.2 mV\"; |...| around the name takes the magnitude");
  };
  Condition out;
  const std::size_t than = text.find_first_of("<>");
  if (than == std::string::npos) return bad("has no < and no >");
  out.than = text[than];
  const auto value = parse_quantity(trimmed(text.substr(than + 1)));
  if (!value) return bad(value.error().what);
  out.value = value.value();
  std::string name = trimmed(text.substr(0, than));
  if (name.size() > 2 && name.front() == '|' && name.back() == '|') {
    out.magnitude = true;
    name = trimmed(name.substr(1, name.size() - 2));
  }
  if (const std::size_t open = name.find('['); open != std::string::npos) {
    if (name.back() != ']') return bad("has a [ without its ]");
    out.variant = trimmed(name.substr(open + 1, name.size() - open - 2));
    name = trimmed(name.substr(0, open));
  }
  const std::size_t dot = name.find('.');
  if (dot == std::string::npos) return bad("names no metric as STEP.METRIC");
  out.step = name.substr(0, dot);
  out.metric = name.substr(dot + 1);
  return out;
}

std::vector<std::string> texts(Query q) {
  std::vector<std::string> out;
  while (q.next()) out.push_back(q.text(0));
  return out;
}

std::optional<Error> unknown_metric(Database& database, const Condition& c) {
  const auto variants =
      texts(database.query("SELECT DISTINCT variant FROM metric WHERE step = ? AND name = ?", c.step, c.metric));
  if (variants.empty())
    return usage(fmt::format("no trial has the metric \"{}.{}\"", printable(c.step), printable(c.metric)),
                 "known are " + listed(texts(database.query("SELECT DISTINCT step || '.' || name FROM metric"))));
  const auto meant = [&](const std::string& v) { return v == c.variant || v.starts_with(c.variant + " "); };
  if (c.variant.empty() || std::any_of(variants.begin(), variants.end(), meant)) return std::nullopt;
  return usage(fmt::format("{}.{} has no variant \"{}\"", c.step, c.metric, printable(c.variant)),
               "known are " + listed(variants));
}

Result<std::set<Id>> meeting(Database& database, const std::string& text) {
  const auto read = read_condition(text);
  if (!read) return read.error();
  const Condition& c = read.value();
  if (auto fault = unknown_metric(database, c)) return *fault;
  std::set<Id> out;
  Query q = database.query(
      "SELECT t.board, x.value, m.unit FROM metric m CROSS JOIN trial t ON t.counts = 1 CROSS JOIN finding x "
      "ON x.trial = t.id AND x.metric = m.id WHERE m.step = ? AND m.name = ? AND (? = '' OR m.variant = ? OR "
      "instr(m.variant, ? || ' ') = 1) AND x.value IS NOT NULL",
      c.step, c.metric, c.variant, c.variant, c.variant);
  while (q.next()) {
    if (q.text(2) != symbol(c.value.unit))
      return usage(fmt::format("{}.{} is found in {}, and the condition is in {}", c.step, c.metric, q.text(2),
                               symbol(c.value.unit)),
                   "write the value in the metric's own unit");
    const double value = c.magnitude ? std::abs(q.real(1)) : q.real(1);
    if (c.than == '>' ? value > c.value.value : value < c.value.value) out.insert(q.integer(0));
  }
  return out;
}

void keep(std::optional<std::set<Id>>& chosen, std::set<Id> wanted) {
  if (!chosen) return void(chosen = std::move(wanted));
  std::erase_if(*chosen, [&](Id id) { return !wanted.contains(id); });
}

std::set<Id> ids(Query q) {
  std::set<Id> out;
  while (q.next()) out.insert(q.integer(0));
  return out;
}

}  // namespace

Result<std::vector<std::string>> chosen_boards(Database& database, const BoardChoice& choice) {
  std::optional<std::set<Id>> chosen;
  if (!choice.serials.empty()) {
    std::set<Id> wanted;
    for (const std::string& scanned : choice.serials) {
      const auto id = database.first("SELECT id FROM board WHERE serial = ?", current_serial(database, scanned));
      if (!id) return usage(fmt::format("board {} is not known", printable(scanned)), "check the serial");
      wanted.insert(*id);
    }
    keep(chosen, std::move(wanted));
  }
  if (!choice.order.empty()) {
    auto wanted = ids(database.query(
        "SELECT d.board FROM product_order o JOIN build d ON d.ord = o.id WHERE o.name = ? UNION "
        "SELECT t.board FROM product_order o JOIN trial t ON t.ord = o.id WHERE o.name = ? AND t.purpose = 0",
        choice.order, choice.order));
    if (wanted.empty()) return usage("no board of order " + printable(choice.order) + " is known", "check the order");
    keep(chosen, std::move(wanted));
  }
  if (!choice.reel.empty()) {
    if (!database.first("SELECT 1 FROM reel WHERE name = ?", choice.reel))
      return usage("reel " + printable(choice.reel) + " is not known", "check the label");
    keep(chosen, ids(database.query("SELECT board_id FROM carries WHERE reel = ?", choice.reel)));
  }
  if (!choice.lot.empty()) {
    if (!database.first("SELECT 1 FROM lot WHERE lot = ?", choice.lot))
      return usage("lot " + printable(choice.lot) + " is not known", "check the label");
    keep(chosen, ids(database.query("SELECT c.board_id FROM carries c JOIN reel r ON r.id = c.reel_id JOIN lot l ON "
                                    "l.id = r.lot WHERE l.lot = ?",
                                    choice.lot)));
  }
  if (!choice.condition.empty()) {
    auto wanted = meeting(database, choice.condition);
    if (!wanted) return wanted.error();
    keep(chosen, std::move(wanted.value()));
  }
  if (!chosen) return usage("no board is named", "give serials, --order, --reel, --lot or --where");
  std::vector<std::tuple<std::string, Id, std::string>> places;
  for (Id id : *chosen) {
    Query q = database.query(
        "SELECT b.serial, o.name, d.build_no FROM board b LEFT JOIN build d ON d.board = b.id "
        "LEFT JOIN product_order o ON o.id = d.ord WHERE b.id = ?",
        id);
    if (q.next()) places.emplace_back(q.text(1), q.integer(2), q.text(0));
  }
  std::sort(places.begin(), places.end());
  std::vector<std::string> out;
  for (auto& [order, place, serial] : places) out.push_back(std::move(serial));
  return database.result(std::move(out));
}

std::string sentence(Bar bar, const BoardNow& b) {
  switch (bar) {
    case Bar::none:
      return {};
    case Bar::scrapped:
      return fmt::format("Board {} is scrapped.", b.serial);
    case Bar::shipped:
      return fmt::format("Board {} is on record as shipped{}.", b.serial,
                         b.shipped_to.empty() ? "" : " to " + b.shipped_to);
    case Bar::held: {
      if (b.holds.empty()) return fmt::format("Board {} is held.", b.serial);
      const HoldOn& h = b.holds.front();
      return fmt::format("Board {} is held{}{}: {}{}", b.serial, h.about.empty() ? "" : " (" + h.about + ")",
                         h.who.empty() ? "" : " by " + h.who, h.reason,
                         b.holds.size() > 1 ? fmt::format(" (and {} more holds).", b.holds.size() - 1) : ".");
    }
    case Bar::already_go:
      return fmt::format("Board {} is GO already.", b.serial);
    case Bar::needs_review:
      return fmt::format("Board {} was NO-GO before its GO: an engineer has not reviewed it.", b.serial);
    case Bar::needs_repair:
      return fmt::format("Board {} has had its {} trials: it needs a repair record, or an engineer's leave.", b.serial,
                         b.standing.trials_since_repair());
    case Bar::not_tried:
      return fmt::format("Board {} was never tried.", b.serial);
    case Bar::untried_since_repair:
      return fmt::format("Board {} was repaired and not tried since.", b.serial);
    case Bar::not_go:
      return fmt::format("Board {} is {}.", b.serial, word(b.standing.judgement().value_or(Judgement::void_)));
    case Bar::withdrawn:
      return fmt::format("Board {} was not tried under a revision that stands for its order.", b.serial);
  }
  return {};
}

}  // namespace jigwright
