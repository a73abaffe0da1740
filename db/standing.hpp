// Where a board stands: folded from its events in the order of the records. Pure; any thread.
//
//                     trial                        trial GO that counts
//        new --------------------> tried -----------------------------------+
//         |                        |  ^ \                                    |
//         | hold                   |  |  \ repair            shipment        v
//         v        release, waive  v  |   +-------> repaired         tried, fit to ship ----> shipped
//        held <------------------ hold|                |                                        |
//         |                        trial <-------------+                                 return |
//         +--> released --- trial ---> tried                                                    v
//                                                                                             tried
//        scrapped: from everywhere, and for good
//
// A trial is barred: scrapped, shipped, held; already GO; GO after NO-GO that nobody has reviewed; as many trials since
// the beginning, the last repair, or the last leave of an engineer as the plan allows (a VOID counts). A shipment is
// barred: scrapped, shipped, held; never tried; repaired since its last trial; its judgement (speaks.hpp) is not GO;
// that trial's revision was withdrawn.
#pragma once
#include <cstdint>
#include <optional>
#include <set>
#include <string>
#include <vector>

#include "db/speaks.hpp"

namespace jigwright {

struct BoardEvent {
  enum class Kind : std::uint8_t { tried, reviewed, held, lifted, repaired, allowed, scrapped, shipped, returned };
  Kind kind{Kind::tried};
  std::string id;                         ///< of the trial (tried, reviewed) or of the hold (held, lifted)
  Judgement judgement{Judgement::void_};  ///< tried
  bool withdrawn{false};                  ///< tried, under a revision that no longer stands for its order
};

enum class BoardState : std::uint8_t { fresh, tried, held, repaired, released, shipped, scrapped };
/// "new", "tried" ...
std::string_view word(BoardState state);

/// Why a trial or a shipment is barred.
enum class Bar : std::uint8_t {
  none,
  scrapped,
  shipped,
  held,
  already_go,    ///< trial only
  needs_review,  ///< a GO after a NO-GO does not count yet
  needs_repair,  ///< trial only: as many trials as the plan allows
  not_tried,     ///< shipment only, as are the next
  untried_since_repair,
  not_go,
  withdrawn,
};

class Standing {
 public:
  void add(const BoardEvent& event);

  BoardState state() const;
  /// Of the trial that speaks for the board; nullopt before the first.
  std::optional<Judgement> judgement() const;
  bool speaking_withdrawn() const;
  /// The last trial was GO and does not count, for a NO-GO before it that was not reviewed.
  bool waits_for_review() const;
  /// Under revisions that stand, since the last repair or leave.
  int trials_since_repair() const { return since_repair_; }
  int trials() const { return static_cast<int>(trials_.size()); }
  const std::set<std::string>& holds() const { return holds_; }
  bool ever_missed() const;  ///< a NO-GO among its trials
  /// The NO-GO whose review would let the last GO count; empty = none.
  std::string to_review() const;

  /// @param retests  how many more trials after the first, until a repair
  Bar may_try(int retests) const;
  Bar may_ship() const;

 private:
  std::optional<std::size_t> speaking() const;

  std::vector<PastTrial> trials_;
  std::vector<std::string> ids_;  ///< beside trials_
  std::vector<bool> withdrawn_;   ///< beside trials_
  std::set<std::string> holds_;
  int since_repair_{0};
  bool scrapped_{false}, shipped_{false}, repaired_{false}, released_{false};
};

}  // namespace jigwright
