// The lists that come in as CSV, read into plain rows: boards of an order, reels, and which reel fed which designator.
// A file's kind is told by its header; columns may stand in any order. Checks of single cells happen here, checks
// across rows, files and the store in enter.cpp. Pure but for `faults`; any thread.
//
//   boards  order, build_no, serial, panel, product
//   reels   reel, maker, part, lot, date_code, distributor, rereeled, quantity, marking
//   feeds   order, designator, reel, from, to [, possible_from, possible_to]
#pragma once
#include <cstdint>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "base/source.hpp"
#include "db/week.hpp"

namespace jigwright {

struct ListCell {
  std::string text;
  SourceRegion region;
};

struct BoardRow {
  ListCell order, build_no, serial, panel, product;
  std::int64_t number{};  ///< build_no: its place in the order of placement, from 1
};

struct ReelRow {
  ListCell reel, maker, part, lot, date_code, distributor, marking;
  std::optional<std::string> week;  ///< date_code as an ISO week
  std::optional<bool> rereeled;     ///< empty = unknown
  std::optional<std::int64_t> quantity;
};

/// Build places from .. to, ends inclusive. Surely from cert_from to cert_to (none where cert_from > cert_to: `from`
/// and `to` were left empty beside a possible stretch), possibly from poss_from to poss_to.
struct FeedRow {
  ListCell order, designator, reel, from, to;
  std::int64_t poss_from{}, cert_from{}, cert_to{}, poss_to{};
};

enum class ListKind { boards, reels, feeds };

struct Lists {
  struct File {
    std::shared_ptr<const SourceText> source;
    std::optional<ListKind> kind;
    bool whole{true};  ///< every row was read, though some may have faults
  };
  std::vector<File> files;
  std::vector<BoardRow> boards;
  std::vector<ReelRow> reels;
  std::vector<FeedRow> feeds;
  /// Names in rows that had faults of their own: known all the same, so that one fault does not cause others.
  std::vector<std::string> faulty_orders, faulty_reels;
};

inline constexpr std::size_t most_faults = 1000;  ///< reading stops there, and says so

Lists read_lists(const std::vector<std::shared_ptr<const SourceText>>& sources, const Week& now, Faults& faults);

}  // namespace jigwright
