// Where boards stand, read from the store: standing.hpp folded over a board's trials and acts, with the holds that
// concern it. Holds may name boards, or a rule (an order, a reel, a maker's lot) that also takes in boards which become
// known later; a release or waiver that bears the same rule ends it for all. Each call that says so is one short
// reading transaction; others run in the caller's. One thread.
#pragma once
#include <cstdint>
#include <map>
#include <optional>
#include <string>
#include <vector>

#include "base/error.hpp"
#include "db/act.hpp"
#include "db/standing.hpp"

namespace jigwright {

/// A hold that is in force for a board.
struct HoldOn {
  Uuid uuid{};
  std::string who, reason, about;  ///< about: "reel R-7003"; empty = the board was named
  std::int64_t at_us{};
};

struct BoardNow {
  std::string serial;          ///< as it is known now
  std::string scanned;         ///< where that was another label: an alias
  bool known{false};           ///< in a list, or tried before
  std::string order, product;  ///< empty = not known
  std::optional<std::int64_t> build_no;
  Standing standing;
  std::vector<HoldOn> holds;
  std::string shipped_to;
};

/// One reading. An unknown serial is no error: `known` is false.
Result<BoardNow> board_now(Database& database, const std::string& serial);
/// The same in the caller's transaction.
BoardNow read_board_now(Database& database, const std::string& serial);

/// Holds by a rule that nobody has ended, oldest first: values "by" and "name" say it. In the caller's transaction.
std::vector<ActRecord> rules_in_force(Database& database);

/// Which boards a person means. All that are given must hold; empty = of no account.
struct BoardChoice {
  std::vector<std::string> serials;
  std::string order, reel, lot;
  /// A finding of the trial that speaks for the board, as in "under-load.load_delta [1 nF] > 0.2 mV".
  std::string condition;
};

/// Serials by order and build place. In the caller's transaction.
/// @return Error kind usage: nothing named, an unknown name, a condition that can't be read
Result<std::vector<std::string>> chosen_boards(Database& database, const BoardChoice& choice);

/// Plain sentences for people: why a trial, or a shipment, is barred. "" for Bar::none.
std::string sentence(Bar bar, const BoardNow& board);

}  // namespace jigwright
