#include "db/feeds.hpp"

#include <fmt/format.h>

#include <algorithm>
#include <vector>

#include "base/error.hpp"
#include "db/journal.hpp"
#include "db/names.hpp"
#include "db/sqlite.hpp"

namespace jigwright {
namespace {

using Id = std::int64_t;

/// Where an order's end is not known: no order has so many boards.
constexpr Id open_end = 999'999'999;

struct Place {
  Id order{};
  std::string name;
  Id build_no{};
};

struct OldFeed {
  Id id{}, reel{};
  std::string name;
  Id poss_from{}, cert_from{}, cert_to{}, poss_to{};
};

class Changing {
 public:
  Changing(Database& database, UuidMaker& uuids, const FeedChange& change)
      : db_(database), uuids_(uuids), change_(change) {}

  Result<FeedChanged> change() {
    if (const auto fault = find(); fault) return *fault;
    Id to = db_.first("SELECT max(build_no) FROM build WHERE ord = ?", place_.order).value_or(0);
    if (to < place_.build_no) to = open_end;
    enter(fmt::format("reel change at {}", change_.designator));
    for (const OldFeed& old : serving()) {
      if (out_.before.empty() || old.cert_from < place_.build_no) out_.before = old.name;
      take_back(old);
      if (old.poss_from < place_.build_no) add(shortened(old));
    }
    add({0, reel_, change_.reel, place_.build_no, place_.build_no, to, to});
    out_.from = place_.build_no;
    out_.to = to;
    return finish();
  }

  Result<FeedChanged> repair() {
    if (const auto fault = find(); fault) return *fault;
    enter(fmt::format("repair of {}", change_.serial));
    add({0, reel_, change_.reel, place_.build_no, place_.build_no, place_.build_no, place_.build_no}, true);
    out_.from = out_.to = place_.build_no;
    return finish();
  }

 private:
  static Error unknown(const std::string& what, const std::optional<std::string>& near) {
    return {Error::Kind::usage, what, {}, near ? fmt::format("did you mean {}?", *near) : "check the label"};
  }

  std::optional<Error> find() {
    const auto reel = db_.first("SELECT id FROM reel WHERE name = ?", change_.reel);
    if (!reel) return unknown(fmt::format("reel {} is not known", change_.reel), nearest_reel(db_, change_.reel));
    reel_ = *reel;
    if (!change_.serial.empty()) {
      Query q = db_.query(
          "SELECT d.ord, o.name, d.build_no FROM board b JOIN build d ON d.board = b.id "
          "JOIN product_order o ON o.id = d.ord WHERE b.serial = ?",
          change_.serial);
      if (!q.next())
        return unknown(fmt::format("board {} has no build place", change_.serial), nearest_serial(db_, change_.serial));
      place_ = {q.integer(0), q.text(1), q.integer(2)};
      return std::nullopt;
    }
    const auto order = db_.first("SELECT id FROM product_order WHERE name = ?", change_.order);
    if (!order) return unknown(fmt::format("order {} is not known", change_.order), nearest_order(db_, change_.order));
    place_ = {*order, change_.order, change_.build_no};
    if (change_.build_no < 1) return unknown("the build place must be 1 or more", std::nullopt);
    return std::nullopt;
  }

  void enter(const std::string& name) {
    station_ = station_row(db_, uuids_, change_.station, change_.at_us);
    const Uuid uuid = uuids_.next(change_.at_us / 1000);
    db_.run("INSERT INTO entered(uuid, kind, name, who) VALUES(?, 'feed', ?, ?)", Blob{bytes(uuid)}, name,
            change_.who.empty() ? std::nullopt : std::optional(change_.who));
    entry_ = db_.last_id();
    out_.order = place_.name;
  }

  /// Feeds of the place that reach beyond the change.
  std::vector<OldFeed> serving() {
    std::vector<OldFeed> out;
    Query q = db_.query(
        "SELECT f.id, f.reel, r.name, f.poss_from, f.cert_from, f.cert_to, f.poss_to FROM feed f "
        "JOIN reel r ON r.id = f.reel WHERE f.ord = ? AND f.designator = ? AND f.poss_to >= ? AND f.repair = 0 AND "
        "f.dropped_us IS NULL ORDER BY f.poss_from",
        place_.order, change_.designator, place_.build_no);
    while (q.next())
      out.push_back({q.integer(0), q.integer(1), q.text(2), q.integer(3), q.integer(4), q.integer(5), q.integer(6)});
    return out;
  }

  OldFeed shortened(OldFeed old) const {
    const Id last = place_.build_no - 1;
    old.poss_to = std::min(old.poss_to, last);
    old.cert_to = std::min(old.cert_to, last);
    return old;
  }

  void take_back(const OldFeed& old) {
    db_.run("UPDATE feed SET dropped_us = ?, dropped_by = ? WHERE id = ?", change_.at_us, entry_, old.id);
  }

  void add(const OldFeed& feed, bool repair = false) {
    const Uuid uuid = uuids_.next(change_.at_us / 1000);
    db_.run(
        "INSERT INTO feed(uuid, ord, designator, reel, poss_from, cert_from, cert_to, poss_to, repair, since_us, "
        "known_us, entered) VALUES(?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        Blob{bytes(uuid)}, place_.order, change_.designator, feed.reel, feed.poss_from, feed.cert_from, feed.cert_to,
        feed.poss_to, repair, repair ? std::optional(after_repairs()) : std::nullopt, change_.at_us, entry_);
  }

  /// Later than every repair of the place on record, though the clock stepped back since.
  std::int64_t after_repairs() {
    const auto last = db_.first(
        "SELECT max(since_us) FROM feed WHERE ord = ? AND designator = ? AND poss_from = ? AND repair = 1 AND "
        "dropped_us IS NULL",
        place_.order, change_.designator, place_.build_no);
    return std::max(change_.at_us, last.value_or(change_.at_us - 1) + 1);
  }

  Result<FeedChanged> finish() {
    if (!db_.failed()) append_lists(db_, station_, entry_, entry_, change_.at_us);
    return db_.result(std::move(out_));
  }

  Database& db_;
  UuidMaker& uuids_;
  const FeedChange& change_;
  Place place_;
  Id reel_{}, station_{}, entry_{};
  FeedChanged out_;
};

}  // namespace

Result<FeedChanged> change_reel(Database& database, UuidMaker& uuids, const FeedChange& change) {
  Transaction transaction(database, Transaction::Kind::write);
  auto out = Changing(database, uuids, change).change();
  if (!out) return out.error();
  if (const auto done = transaction.commit(); !done) return done.error();
  return out;
}

Result<FeedChanged> add_repair_feed(Database& database, UuidMaker& uuids, const FeedChange& change) {
  return Changing(database, uuids, change).repair();
}

}  // namespace jigwright
