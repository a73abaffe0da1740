#include "db/enter.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <functional>
#include <limits>
#include <map>
#include <unordered_map>
#include <unordered_set>

#include "base/nearest.hpp"
#include "db/journal.hpp"
#include "db/lists.hpp"
#include "db/names.hpp"
#include "db/sqlite.hpp"
#include "db/uuid.hpp"

namespace jigwright {
namespace {

using Id = std::int64_t;

/// "WO-1041 4" for the board at build number 4: order names hold no control characters.
std::string place_key(const std::string& order, std::int64_t number) {
  return order + '\n' + std::to_string(number);
}

std::string stands(const SourceRegion& region) {
  return region.source ? "at " + where(region) : "in the store";
}

std::optional<std::string> unless_empty(const std::string& text) {
  return text.empty() ? std::nullopt : std::optional(text);
}

/// A row that is in the store already, or one that an earlier row of the lists repeats, is not written.
enum class Fate { added, unchanged };

class Entering {
 public:
  Entering(Database& database, const Lists& lists, Faults& faults) : db_(database), lists_(lists), faults_(faults) {}

  void check() {
    note_names();
    check_boards();
    check_reels();
    check_feeds();
  }
  void write(UuidMaker& uuids, std::int64_t now_us, const EnteredBy& by);
  std::vector<EnteredFile> counts() const;

 private:
  struct Stretch {
    std::string reel;
    std::int64_t poss_from, cert_from, cert_to, poss_to;
    const FeedRow* row;  // nullptr = in the store
  };
  bool enough() const { return faults_.any() && faults_.all().size() >= most_faults; }
  bool all_read(ListKind kind) const;
  void note_names();
  bool known_order(const std::string& name);
  bool known_reel(const std::string& name);

  void check_boards();
  bool check_product(const BoardRow& row);
  bool check_serial_is_no_reel(const BoardRow& row);
  bool check_place(const BoardRow& row, const BoardRow*& twin);
  Fate fate_in_store(const BoardRow& row);

  void check_reels();
  void compare_reels(const ReelRow& row, const ReelRow& other);
  void check_reel_is_no_serial(const ReelRow& row);
  std::optional<ReelRow> stored_reel(const std::string& name);

  void check_feeds();
  bool check_feed_names(const FeedRow& row);
  void check_end_of_order(const FeedRow& row);
  void check_designator(const std::string& order, const std::string& designator, std::vector<const FeedRow*> rows);
  std::vector<Stretch> stored_stretches(const std::string& order, const std::string& designator);
  bool in_store(const FeedRow& row, const std::vector<Stretch>& stored);
  void check_overlaps(std::vector<Stretch> stretches);
  void check_same_reel(std::vector<Stretch> stretches);
  void overlap(const Stretch& a, const Stretch& b, std::int64_t from, std::int64_t to);
  void check_quantities();
  std::int64_t used_in_store(const std::string& reel);
  std::optional<std::int64_t> quantity_of(const std::string& reel);

  Id order_id(const std::string& name);
  Id board_id(const std::string& serial);
  Id reel_id(const std::string& name) { return db_.first("SELECT id FROM reel WHERE name = ?", name).value_or(0); }
  Id lot_id(const ReelRow& row);
  Id entry(const SourceRegion& region, const char* kind);
  void write_journal(Id station, std::int64_t now_us);
  void write_boards();
  void write_reels();
  void write_feeds(UuidMaker& uuids, std::int64_t now_us);

  Database& db_;
  const Lists& lists_;
  Faults& faults_;
  std::unordered_set<std::string> orders_, reels_, serials_;  // named by the lists
  std::unordered_map<std::string, const BoardRow*> products_, by_serial_, by_place_;
  std::unordered_map<std::string, const ReelRow*> by_reel_;
  std::unordered_map<std::string, std::int64_t> last_build_no_;  // in the lists
  std::vector<std::pair<const BoardRow*, Fate>> boards_;
  std::vector<std::pair<const ReelRow*, Fate>> reel_rows_;
  std::vector<std::pair<const FeedRow*, Fate>> feeds_;
  std::function<Id(const SourceText&, const char*)> note_;
  std::map<const SourceText*, Id> entries_;  // files that brought something, and their records' rows
};

bool Entering::all_read(ListKind kind) const {
  return std::all_of(lists_.files.begin(), lists_.files.end(),
                     [&](const Lists::File& f) { return f.whole || (f.kind && *f.kind != kind); });
}

void Entering::note_names() {
  orders_.insert(lists_.faulty_orders.begin(), lists_.faulty_orders.end());
  reels_.insert(lists_.faulty_reels.begin(), lists_.faulty_reels.end());
  for (const BoardRow& row : lists_.boards) {
    orders_.insert(row.order.text);
    serials_.insert(row.serial.text);
    auto& last = last_build_no_[row.order.text];
    last = std::max(last, row.number);
  }
  for (const ReelRow& row : lists_.reels) reels_.insert(row.reel.text);
}

bool Entering::known_order(const std::string& name) {
  return orders_.contains(name) ||
         db_.first("SELECT 1 FROM product_order o WHERE name = ? AND EXISTS(SELECT 1 FROM build WHERE ord = o.id)",
                   name);
}

bool Entering::known_reel(const std::string& name) {
  return reels_.contains(name) || db_.first("SELECT 1 FROM reel WHERE name = ?", name);
}

void Entering::check_boards() {
  for (const BoardRow& row : lists_.boards) {
    if (enough() || db_.failed()) return;
    const BoardRow* twin = nullptr;
    const bool sound = check_serial_is_no_reel(row) & check_product(row) & check_place(row, twin);
    if (!sound) continue;
    boards_.emplace_back(&row, twin != nullptr ? Fate::unchanged : fate_in_store(row));
  }
}

bool Entering::check_serial_is_no_reel(const BoardRow& row) {
  if (!known_reel(row.serial.text)) return true;
  faults_.fault(row.serial.region, fmt::format("\"{}\" is a reel, where a serial is due", row.serial.text),
                "scan the board's own label");
  return false;
}

bool Entering::check_product(const BoardRow& row) {
  if (row.product.text.empty()) return true;
  std::string other;
  SourceRegion at;
  if (const auto [held, fresh] = products_.try_emplace(row.order.text, &row); !fresh) {
    other = held->second->product.text;
    at = held->second->product.region;
  } else {
    Query q = db_.query("SELECT product FROM product_order WHERE name = ? AND product IS NOT NULL", row.order.text);
    if (q.next()) other = q.text(0);
  }
  if (other.empty() || other == row.product.text) return true;
  faults_.fault(
      row.product.region,
      fmt::format("order {} makes \"{}\" ({}), not \"{}\"", row.order.text, other, stands(at), row.product.text),
      "an order makes one product");
  return false;
}

/// @param twin  set to an earlier row of the lists that says the same
bool Entering::check_place(const BoardRow& row, const BoardRow*& twin) {
  const auto [serial, new_serial] = by_serial_.try_emplace(row.serial.text, &row);
  const auto [place, new_place] = by_place_.try_emplace(place_key(row.order.text, row.number), &row);
  const BoardRow& same_serial = *serial->second;
  const BoardRow& same_place = *place->second;
  if (!new_serial && (same_serial.order.text != row.order.text || same_serial.number != row.number)) {
    faults_.fault(row.serial.region,
                  fmt::format("serial \"{}\" stands {} with build number {} of {} already", row.serial.text,
                              stands(same_serial.serial.region), same_serial.number, same_serial.order.text),
                  "a board is built once: correct one of the two");
    return false;
  }
  if (!new_place && same_place.serial.text != row.serial.text) {
    faults_.fault(row.build_no.region,
                  fmt::format("build number {} of {} is \"{}\" already ({})", row.number, row.order.text,
                              same_place.serial.text, stands(same_place.build_no.region)),
                  "a build number belongs to one board: correct one of the two");
    return false;
  }
  if (!new_serial && same_serial.panel.text != row.panel.text) {
    faults_.fault(row.panel.region,
                  fmt::format("\"{}\" is on panel \"{}\" already ({})", row.serial.text, same_serial.panel.text,
                              stands(same_serial.panel.region)),
                  "correct one of the two");
    return false;
  }
  if (!new_serial) twin = &same_serial;
  return true;
}

Fate Entering::fate_in_store(const BoardRow& row) {
  {
    Query q = db_.query(
        "SELECT o.name, d.build_no, d.panel FROM board b JOIN build d ON d.board = b.id "
        "JOIN product_order o ON o.id = d.ord WHERE b.serial = ?",
        row.serial.text);
    if (q.next()) {
      if (q.text(0) != row.order.text || q.integer(1) != row.number)
        faults_.fault(row.serial.region,
                      fmt::format("serial \"{}\" stands in the store with build number {} of {} already",
                                  row.serial.text, q.integer(1), q.text(0)),
                      "a board is built once: write what the store has");
      else if (q.text(2) != row.panel.text)
        faults_.fault(row.panel.region,
                      fmt::format("\"{}\" is on panel \"{}\" already (in the store)", row.serial.text, q.text(2)),
                      "write what the store has");
      return Fate::unchanged;
    }
  }
  Query q = db_.query(
      "SELECT b.serial FROM product_order o JOIN build d ON d.ord = o.id AND d.build_no = ? "
      "JOIN board b ON b.id = d.board WHERE o.name = ?",
      row.number, row.order.text);
  if (q.next())
    faults_.fault(
        row.build_no.region,
        fmt::format("build number {} of {} is \"{}\" already (in the store)", row.number, row.order.text, q.text(0)),
        "a build number belongs to one board: write what the store has");
  return Fate::added;
}

void Entering::check_reels() {
  for (const ReelRow& row : lists_.reels) {
    if (enough() || db_.failed()) return;
    check_reel_is_no_serial(row);
    const auto [held, fresh] = by_reel_.try_emplace(row.reel.text, &row);
    if (!fresh) {
      compare_reels(row, *held->second);
      reel_rows_.emplace_back(&row, Fate::unchanged);
      continue;
    }
    const auto stored = stored_reel(row.reel.text);
    if (stored) compare_reels(row, *stored);
    reel_rows_.emplace_back(&row, stored ? Fate::unchanged : Fate::added);
  }
}

void Entering::check_reel_is_no_serial(const ReelRow& row) {
  if (!serials_.contains(row.reel.text) && !db_.first("SELECT 1 FROM board WHERE serial = ?", row.reel.text)) return;
  if (serials_.contains(row.reel.text)) return;  // named where the serial stands
  faults_.fault(row.reel.region, fmt::format("\"{}\" is a board's serial, where a reel is due", row.reel.text),
                "scan the reel's own label");
}

std::string shown(std::optional<bool> rereeled) {
  return !rereeled ? "" : *rereeled ? "yes" : "no";
}
std::string shown(std::optional<std::int64_t> quantity) {
  return quantity ? std::to_string(*quantity) : "";
}

void Entering::compare_reels(const ReelRow& row, const ReelRow& other) {
  struct Pair {
    const char* column;
    std::string here, there;
  };
  for (const Pair& p :
       {Pair{"maker", row.maker.text, other.maker.text}, Pair{"part", row.part.text, other.part.text},
        Pair{"lot", row.lot.text, other.lot.text}, Pair{"date_code", row.week.value_or(""), other.week.value_or("")},
        Pair{"distributor", row.distributor.text, other.distributor.text},
        Pair{"rereeled", shown(row.rereeled), shown(other.rereeled)},
        Pair{"quantity", shown(row.quantity), shown(other.quantity)},
        Pair{"marking", row.marking.text, other.marking.text}}) {
    if (p.here == p.there) continue;
    faults_.fault(row.reel.region,
                  fmt::format("reel \"{}\" stands {} already with another {}: \"{}\", not \"{}\"", row.reel.text,
                              stands(other.reel.region), p.column, p.there, p.here),
                  other.reel.region.source ? "one name for one reel: correct one of the two"
                                           : "one name for one reel: write what the store has, or name this reel anew");
    return;
  }
}

std::optional<ReelRow> Entering::stored_reel(const std::string& name) {
  Query q = db_.query(
      "SELECT l.maker, l.part, l.lot, r.date_code, r.distributor, r.rereeled, r.quantity, r.marking "
      "FROM reel r JOIN lot l ON l.id = r.lot WHERE r.name = ?",
      name);
  if (!q.next()) return std::nullopt;
  ReelRow out;
  out.maker.text = q.text(0);
  out.part.text = q.text(1);
  out.lot.text = q.text(2);
  if (!q.null(3)) out.week = q.text(3);
  out.distributor.text = q.text(4);
  if (!q.null(5)) out.rereeled = q.integer(5) != 0;
  out.quantity = q.maybe_integer(6);
  out.marking.text = q.text(7);
  return out;
}

void Entering::check_feeds() {
  std::map<std::pair<std::string, std::string>, std::vector<const FeedRow*>> places;
  for (const FeedRow& row : lists_.feeds) {
    if (enough() || db_.failed()) return;
    if (!check_feed_names(row)) continue;
    check_end_of_order(row);
    places[{row.order.text, row.designator.text}].push_back(&row);
  }
  for (const auto& [place, rows] : places) check_designator(place.first, place.second, rows);
  check_quantities();
}

bool Entering::check_feed_names(const FeedRow& row) {
  bool sound = true;
  auto fault = [&](const ListCell& at, std::string what, std::string to_do) {
    faults_.fault(at.region, std::move(what), std::move(to_do));
    sound = false;
  };
  auto advice = [](const std::optional<std::string>& near, const char* else_do) {
    return near ? fmt::format("did you mean \"{}\"?", *near) : std::string(else_do);
  };
  if (known_reel(row.designator.text))
    fault(row.designator, fmt::format("\"{}\" is a reel, where a designator is due", row.designator.text),
          "write a place on the board, as in U7 or R12");
  else if (!known_reel(row.reel.text) && all_read(ListKind::reels))
    fault(row.reel, fmt::format("unknown reel \"{}\"", row.reel.text),
          advice(nearest_reel(db_, row.reel.text, {reels_.begin(), reels_.end()}), "enter the list of reels with it"));
  if (!known_order(row.order.text) && all_read(ListKind::boards))
    fault(row.order, fmt::format("unknown order \"{}\"", row.order.text),
          advice(nearest_order(db_, row.order.text, {orders_.begin(), orders_.end()}),
                 "enter the list of its boards with it"));
  return sound;
}

void Entering::check_end_of_order(const FeedRow& row) {
  std::int64_t last =
      db_.first("SELECT max(d.build_no) FROM product_order o JOIN build d ON d.ord = o.id WHERE o.name = ?",
                row.order.text)
          .value_or(0);
  if (const auto found = last_build_no_.find(row.order.text); found != last_build_no_.end())
    last = std::max(last, found->second);
  if (last == 0 || row.cert_to <= last) return;
  faults_.warning(row.to.region, fmt::format("order {} has boards up to build number {} only", row.order.text, last),
                  "check the range");
}

std::vector<Entering::Stretch> Entering::stored_stretches(const std::string& order, const std::string& designator) {
  std::vector<Stretch> out;
  Query q = db_.query(
      "SELECT r.name, f.poss_from, f.cert_from, f.cert_to, f.poss_to FROM product_order o JOIN feed f ON f.ord = o.id "
      "JOIN reel r ON r.id = f.reel WHERE o.name = ? AND f.designator = ? AND f.repair = 0 AND f.dropped_us IS NULL",
      order, designator);
  while (q.next()) out.push_back({q.text(0), q.integer(1), q.integer(2), q.integer(3), q.integer(4), nullptr});
  return out;
}

bool same_stretch(const FeedRow& row, const std::string& reel, std::int64_t poss_from, std::int64_t cert_from,
                  std::int64_t cert_to, std::int64_t poss_to) {
  return row.reel.text == reel && row.poss_from == poss_from && row.cert_from == cert_from && row.cert_to == cert_to &&
         row.poss_to == poss_to;
}

bool Entering::in_store(const FeedRow& row, const std::vector<Stretch>& stored) {
  return std::any_of(stored.begin(), stored.end(), [&](const Stretch& s) {
    return same_stretch(row, s.reel, s.poss_from, s.cert_from, s.cert_to, s.poss_to);
  });
}

void Entering::check_designator(const std::string& order, const std::string& designator,
                                std::vector<const FeedRow*> rows) {
  std::vector<Stretch> stretches = stored_stretches(order, designator);
  for (const FeedRow* row : rows) {
    const bool repeated = in_store(*row, stretches);  // also by an earlier row of the lists
    feeds_.emplace_back(row, repeated ? Fate::unchanged : Fate::added);
    if (!repeated)
      stretches.push_back({row->reel.text, row->poss_from, row->cert_from, row->cert_to, row->poss_to, row});
  }
  check_overlaps(stretches);
  check_same_reel(std::move(stretches));
}

void Entering::overlap(const Stretch& a, const Stretch& b, std::int64_t from, std::int64_t to) {
  if (a.row == nullptr && b.row == nullptr) return;
  const Stretch& fresh = b.row != nullptr ? b : a;
  const Stretch& other = b.row != nullptr ? a : b;
  const FeedRow& row = *fresh.row;
  const std::string boards = from == to ? fmt::format("build number {} of {}", from, row.order.text)
                                        : fmt::format("build numbers {} to {} of {}", from, to, row.order.text);
  const std::string there =
      fmt::format("{} stands {}", other.reel, other.row ? "at " + where(other.row->reel.region) : "in the store");
  if (fresh.reel == other.reel)
    faults_.fault(row.reel.region,
                  fmt::format("{} is given twice at {} for {}", fresh.reel, row.designator.text, boards),
                  there + "; write ranges that do not overlap");
  else
    faults_.fault(
        row.reel.region,
        fmt::format("{} and {} are both certain at {} for {}", fresh.reel, other.reel, row.designator.text, boards),
        there +
            "; end one before the other begins, or leave from and to empty and give possible_from and "
            "possible_to");
}

/// Two reels that are both certain for a board.
void Entering::check_overlaps(std::vector<Stretch> stretches) {
  std::erase_if(stretches, [](const Stretch& s) { return s.cert_from > s.cert_to; });
  std::stable_sort(stretches.begin(), stretches.end(),
                   [](const Stretch& a, const Stretch& b) { return a.cert_from < b.cert_from; });
  const Stretch* farthest = nullptr;
  for (const Stretch& s : stretches) {
    if (farthest != nullptr && s.cert_from <= farthest->cert_to && s.reel != farthest->reel)
      overlap(*farthest, s, s.cert_from, std::min(s.cert_to, farthest->cert_to));
    if (farthest == nullptr || s.cert_to > farthest->cert_to) farthest = &s;
  }
}

/// One reel whose stretches share boards, surely or possibly: the board would carry it twice.
void Entering::check_same_reel(std::vector<Stretch> stretches) {
  std::stable_sort(stretches.begin(), stretches.end(), [](const Stretch& a, const Stretch& b) {
    return std::pair(a.reel, a.poss_from) < std::pair(b.reel, b.poss_from);
  });
  const Stretch* farthest = nullptr;
  for (const Stretch& s : stretches) {
    const bool same = farthest != nullptr && farthest->reel == s.reel;
    if (same && s.poss_from <= farthest->poss_to)
      overlap(*farthest, s, s.poss_from, std::min(s.poss_to, farthest->poss_to));
    if (!same || s.poss_to > farthest->poss_to) farthest = &s;
  }
}

void Entering::check_quantities() {
  std::map<std::string, std::pair<std::int64_t, const FeedRow*>> used;
  for (const auto& [row, fate] : feeds_) {
    if (fate == Fate::unchanged) continue;
    auto& [parts, last] = used[row->reel.text];
    parts += std::max<std::int64_t>(0, row->cert_to - row->cert_from + 1);
    if (last == nullptr || last->reel.region.line < row->reel.region.line) last = row;
  }
  for (const auto& [reel, use] : used) {
    const auto held = quantity_of(reel);
    const std::int64_t parts = use.first + used_in_store(reel);
    if (!held || parts <= *held) continue;
    faults_.warning(use.second->reel.region,
                    fmt::format("reel {} held {} parts, and its feeds take {}", reel, *held, parts),
                    "check the ranges and the reel's quantity");
  }
}

std::int64_t Entering::used_in_store(const std::string& reel) {
  return db_
      .first(
          "SELECT sum(max(0, f.cert_to - f.cert_from + 1)) FROM reel r JOIN feed f ON f.reel = r.id "
          "WHERE r.name = ? AND f.dropped_us IS NULL",
          reel)
      .value_or(0);
}

std::optional<std::int64_t> Entering::quantity_of(const std::string& reel) {
  if (const auto found = by_reel_.find(reel); found != by_reel_.end()) return found->second->quantity;
  Query q = db_.query("SELECT quantity FROM reel WHERE name = ?", reel);
  return q.next() ? q.maybe_integer(0) : std::nullopt;
}

void Entering::write(UuidMaker& uuids, std::int64_t now_us, const EnteredBy& by) {
  note_ = [&, who = unless_empty(by.who)](const SourceText& file, const char* kind) {
    const Uuid uuid = uuids.next(now_us / 1000);
    db_.run("INSERT INTO entered(uuid, kind, name, who) VALUES(?, ?, ?, ?)", Blob{bytes(uuid)}, kind, file.name, who);
    return db_.last_id();
  };
  write_boards();
  write_reels();
  write_feeds(uuids, now_us);
  if (!entries_.empty()) write_journal(station_row(db_, uuids, by.station, now_us), now_us);
}

/// The row of a file's record, made when the file first brings something.
Id Entering::entry(const SourceRegion& region, const char* kind) {
  const auto [at, fresh] = entries_.try_emplace(region.source.get());
  if (fresh) at->second = note_(*region.source, kind);
  return at->second;
}

void Entering::write_journal(Id station, std::int64_t now_us) {
  Id first = std::numeric_limits<Id>::max();
  for (const auto& [file, id] : entries_) first = std::min(first, id);
  append_lists(db_, station, first, std::numeric_limits<Id>::max(), now_us);
}

Id Entering::order_id(const std::string& name) {
  if (const auto id = db_.first("SELECT id FROM product_order WHERE name = ?", name)) return *id;
  db_.run("INSERT INTO product_order(name) VALUES(?)", name);
  return db_.last_id();
}

Id Entering::board_id(const std::string& serial) {
  if (const auto id = db_.first("SELECT id FROM board WHERE serial = ?", serial)) return *id;
  db_.run("INSERT INTO board(serial) VALUES(?)", serial);
  return db_.last_id();
}

void Entering::write_boards() {
  for (const auto& [row, fate] : boards_)
    if (fate == Fate::added)
      db_.run("INSERT INTO build(ord, build_no, board, panel, entered) VALUES(?, ?, ?, ?, ?)",
              order_id(row->order.text), row->number, board_id(row->serial.text), unless_empty(row->panel.text),
              entry(row->serial.region, "boards"));
  for (const auto& [order, row] : products_)
    if (db_.first("SELECT 1 FROM product_order WHERE name = ? AND product IS NULL", order))
      db_.run("UPDATE product_order SET product = ?, entered = ? WHERE name = ?", row->product.text,
              entry(row->product.region, "boards"), order);
}

Id Entering::lot_id(const ReelRow& row) {
  if (const auto id = db_.first("SELECT id FROM lot WHERE maker = ? AND part = ? AND lot = ?", row.maker.text,
                                row.part.text, row.lot.text))
    return *id;
  db_.run("INSERT INTO lot(maker, part, lot) VALUES(?, ?, ?)", row.maker.text, row.part.text, row.lot.text);
  return db_.last_id();
}

void Entering::write_reels() {
  for (const auto& [row, fate] : reel_rows_)
    if (fate == Fate::added)
      db_.run(
          "INSERT INTO reel(name, lot, date_code, distributor, rereeled, quantity, marking, entered) VALUES(?, ?, ?, "
          "?, ?, ?, ?, ?)",
          row->reel.text, lot_id(*row), row->week, unless_empty(row->distributor.text), row->rereeled, row->quantity,
          unless_empty(row->marking.text), entry(row->reel.region, "reels"));
}

void Entering::write_feeds(UuidMaker& uuids, std::int64_t now_us) {
  for (const auto& [row, fate] : feeds_) {
    if (fate == Fate::unchanged) continue;
    const Uuid uuid = uuids.next(now_us / 1000);
    db_.run(
        "INSERT INTO feed(uuid, ord, designator, reel, poss_from, cert_from, cert_to, poss_to, known_us, entered) "
        "VALUES(?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        Blob{bytes(uuid)}, order_id(row->order.text), row->designator.text, reel_id(row->reel.text), row->poss_from,
        row->cert_from, row->cert_to, row->poss_to, now_us, entry(row->reel.region, "feeds"));
  }
}

std::vector<EnteredFile> Entering::counts() const {
  std::vector<EnteredFile> out;
  for (const Lists::File& file : lists_.files) {
    const char* kind = file.kind == ListKind::boards ? "boards" : file.kind == ListKind::reels ? "reels" : "feeds";
    EnteredFile entered{file.source->name, kind, 0, 0};
    auto count = [&](const SourceRegion& region, Fate fate) {
      if (region.source == file.source) ++(fate == Fate::added ? entered.added : entered.unchanged);
    };
    for (const auto& [row, fate] : boards_) count(row->serial.region, fate);
    for (const auto& [row, fate] : reel_rows_) count(row->reel.region, fate);
    for (const auto& [row, fate] : feeds_) count(row->reel.region, fate);
    out.push_back(entered);
  }
  return out;
}

}  // namespace

Result<std::vector<EnteredFile>> enter_lists(Database& database, UuidMaker& uuids,
                                             const std::vector<std::shared_ptr<const SourceText>>& sources,
                                             std::int64_t now_us, Faults& faults, const EnteredBy& by) {
  using namespace std::chrono;
  const Week now = week_of(floor<days>(sys_time<microseconds>(microseconds(now_us))));
  const Lists lists = read_lists(sources, now, faults);
  Transaction transaction(database, Transaction::Kind::write);
  Entering entering(database, lists, faults);
  entering.check();
  if (database.failed()) return database.error();
  if (faults.any()) return std::vector<EnteredFile>{};
  entering.write(uuids, now_us, by);
  const auto done = transaction.commit();
  if (!done) return done.error();
  return entering.counts();
}

}  // namespace jigwright
