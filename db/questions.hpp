// What people ask of the store, and the plain answers: which reels does a board carry, which boards carry a reel, what
// was found on a board. Each answer is read in one short transaction. `certain` means that the records prove it;
// otherwise it is possible (a change known only within a window, one of two feeders). One thread.
#pragma once
#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "base/finding.hpp"
#include "db/trial_record.hpp"
#include "db/uuid.hpp"
#include "limits/judge.hpp"
#include "limits/limit.hpp"

namespace jigwright {

class Database;

struct ReelFacts {
  std::string reel, maker, part, lot;
  std::string date_code;  ///< ISO week, "2024-W31"; empty = not known, as are the next
  std::string distributor, marking;
  std::optional<bool> rereeled;
  std::optional<std::int64_t> quantity;
};

/// A board, its build place, and what the trial that speaks for it said.
struct BoardPlace {
  std::string serial;
  std::string order, product, panel;     ///< empty = not known
  std::optional<std::int64_t> build_no;  ///< place in the order of placement
  std::optional<Judgement> judgement;    ///< empty before the first trial
  std::optional<std::int64_t> at_us;     ///< when that trial began
  std::int64_t trials{};
};

struct Carried {
  std::string designator;
  ReelFacts reel;
  bool certain{};
};

struct SerialTrace {
  BoardPlace board;
  std::vector<Carried> reels;  ///< by designator as people count ("U7" before "U10"), certain first
};

struct Carrier {
  BoardPlace board;
  std::vector<std::string> designators;  ///< where it carries the reel
  bool certain{};                        ///< at one of them at least
};

struct ReelTrace {
  ReelFacts reel;
  std::vector<Carrier> boards;  ///< by order and build place
};

struct ShownFinding {
  Metric metric;
  std::optional<Limit> limit;  ///< empty = recorded only
  Judged judged;               ///< margin: share of the room between nominal and limit that is left
};

struct ShownTrial {
  Uuid uuid{};
  int attempt{};
  bool counts{};  ///< speaks for the board
  bool open{};    ///< never ended: killed, or under way
  Origin origin{};
  std::int64_t at_us{};
  std::optional<std::int64_t> took_ms;
  std::string operator_name, station, program, plan, limit_set, depth;
  int nest{};
  std::int64_t limit_revision{};
  std::optional<std::int64_t> adopted;  ///< as TrialStart's
  Judgement judgement{Judgement::void_};
  std::string void_reason, unsafe;
  std::optional<std::string> deciding;  ///< label of the metric that decided
  std::optional<double> ambient_C;
  int missed{};                        ///< limits missed
  std::vector<ShownFinding> findings;  ///< least margin first; those without a margin last, in the plan's order
};

struct BoardShown {
  BoardPlace board;
  std::vector<ShownTrial> trials;  ///< oldest first
};

/// Error kind usage for an unknown name, with the nearest known one; kind store when the store can't be read.
Result<SerialTrace> trace_serial(Database& database, const std::string& serial);
Result<ReelTrace> trace_reel(Database& database, const std::string& reel);
Result<BoardShown> show_board(Database& database, const std::string& serial);

}  // namespace jigwright
