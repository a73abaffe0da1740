// What the tests of acts share: lists from literals, and acts as the desk's commands write them.
#pragma once
#include <utility>

#include "db/act.hpp"
#include "db/boards.hpp"
#include "db/feeds.hpp"
#include "db/revisions.hpp"
#include "tests/db/room.hpp"

namespace jigwright::room {

inline std::shared_ptr<const SourceText> csv(const std::string& name, const std::string& text) {
  auto out = std::make_shared<SourceText>();
  out->name = name;
  out->text = text;
  return out;
}

inline void enter(Store& store, const std::vector<std::pair<std::string, std::string>>& files) {
  std::vector<std::shared_ptr<const SourceText>> sources;
  for (const auto& [name, text] : files) sources.push_back(csv(name, text));
  Faults faults;
  must(store.enter(sources, noon_us, faults));
  REQUIRE(render(faults) == "");
}

/// "order,build_no,serial,panel,product" of places first to last, serials TB-01 and so on.
inline std::string places(const std::string& order, int first, int last, int serial) {
  std::string out = "order,build_no,serial,panel,product\n";
  for (int i = first; i <= last; ++i, ++serial)
    out += order + "," + std::to_string(i) + ",TB-" + (serial < 10 ? "0" : "") + std::to_string(serial) + ",,amp\n";
  return out;
}

inline constexpr const char* two_reels =
    "reel,maker,part,lot,date_code,distributor,rereeled,quantity,marking\nR-1,Alder,OA,L1,,,,,\nR-2,Birch,OA,L2,,,,,\n"
    "R-3,Birch,OA,L2,,,,,\nR-9,Cedar,OA,L9,,,,,\n";

/// TB-01 to TB-10 of WO-1, TB-21 and TB-22 of WO-2. U7: R-1 serves places 1 to 4, R-2 6 to 10; 5 had either.
inline void enter_two_orders(Store& store) {
  enter(store, {{"first.csv", places("WO-1", 1, 10, 1)},
                {"second.csv", places("WO-2", 1, 2, 21)},
                {"reels.csv", two_reels},
                {"feeds.csv",
                 "order,designator,reel,from,to,possible_from,possible_to\nWO-1,U7,R-1,1,4,1,5\nWO-1,U7,R-2,6,10,5,"
                 "10\nWO-2,U7,R-3,1,2,1,2\n"}});
}

inline ActRecord act(const std::string& kind, std::vector<std::string> boards, std::int64_t at_us = noon_us) {
  ActRecord out;
  out.kind = kind;
  out.boards = std::move(boards);
  out.at_us = at_us;
  out.station = "office";
  out.who = "E. Engineer";
  out.reason = "so it was";
  return out;
}

inline Uuid write(Store& store, const ActRecord& act) {
  return must(write_act(store.database(), store.uuids(), act));
}

inline Uuid hold(Store& store, std::vector<std::string> boards, const std::string& reason = "a doubt") {
  ActRecord out = act("hold", std::move(boards));
  out.reason = reason;
  return write(store, out);
}

/// As the desk writes a hold by one rule alone: with the boards that are known now.
inline Uuid hold_by(Store& store, const std::string& by, const std::string& name, std::vector<std::string> now = {}) {
  ActRecord out = act("hold", std::move(now));
  out.about = by + " " + name;
  out.values = {{"by", by}, {"name", name}};
  return write(store, out);
}

inline Uuid lift(Store& store, const std::string& kind, const Uuid& hold, std::vector<std::string> boards) {
  ActRecord out = act(kind, std::move(boards));
  out.ends = hold;
  return write(store, out);
}

/// As the desk writes what names a hold's own rule.
inline Uuid lift_rule(Store& store, const Uuid& hold, const std::string& by, const std::string& name,
                      std::vector<std::string> boards) {
  ActRecord out = act("release", std::move(boards));
  out.ends = hold;
  out.values = {{"by", by}, {"name", name}};
  return write(store, out);
}

inline BoardNow now(Store& store, const std::string& serial) {
  return must(board_now(store.database(), serial));
}

inline Bar trial_bar(Store& store, const std::string& serial, int retests = 1) {
  return now(store, serial).standing.may_try(retests);
}
inline Bar shipment_bar(Store& store, const std::string& serial) {
  return now(store, serial).standing.may_ship();
}

}  // namespace jigwright::room
