// An invented factory, the same for the same seed: boards on panels of four in orders, reels that feed twenty places,
// and trials whose findings carry the effect of the reels. It fills a store through the store's public calls, and knows
// the truth to compare with. Board numbers run from 0. Pure but for fill(); any thread.
#pragma once
#include <cstdint>
#include <memory>
#include <string>
#include <vector>

#include "db/store.hpp"

namespace jigwright::room {

struct FactoryOptions {
  std::uint64_t seed{1};
  std::int64_t boards{1000};
  std::int64_t boards_per_order{5000};
  int findings{40};   ///< per trial, 10 .. 1000
  int readings{600};  ///< per trial; about 1.5 bytes each
};

class Factory {
 public:
  explicit Factory(const FactoryOptions& options);

  std::int64_t boards() const { return options_.boards; }
  std::string serial(std::int64_t board) const;
  std::string order(std::int64_t board) const;
  std::int64_t build_no(std::int64_t board) const;  ///< within its order, from 1

  /// Designators, and the reel that fed one of them for a board.
  static constexpr int places = 20;
  std::string designator(int place) const;
  std::string reel(int place, std::int64_t board) const;
  /// The place whose reels matter, and whether the board's reel there is from the second source, which shifts every
  /// finding of the step "under-load".
  static constexpr int driver = 6;
  bool second_source(std::int64_t board) const;

  TrialStart start(std::int64_t board) const;
  TrialEnd end(std::int64_t board) const;

  /// The lists of one order, from its first board: boards, reels, feeds.
  std::vector<std::shared_ptr<const SourceText>> lists(std::int64_t first_board) const;
  /// Enters the lists of every order.
  Result<Done> enter_all(Store& store) const;
  /// Enters the lists and logs one trial a board.
  Result<Done> fill(Store& store) const;

 private:
  std::int64_t stretch(int place) const;  ///< boards that one reel serves
  std::int64_t reel_number(int place, std::int64_t board) const;
  double noise(std::int64_t board, int index) const;  ///< mean 0, standard deviation 1
  std::string raw(std::int64_t board) const;

  FactoryOptions options_;
  TrialStart start_;
  TrialEnd end_;  ///< with everything that boards share
};

}  // namespace jigwright::room
