// What a step kind is: one file in steps/ with a class that reads its table of the plan, and two pure functions,
// expand() (what to set and read) and reduce() (what the readings say), listed once in kinds.cpp. Steps know the jig's
// description, not limits, files, clock or store. Immutable once read; any thread.
#pragma once
#include <memory>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "base/finding.hpp"
#include "base/toml.hpp"
#include "fixtures/jig.hpp"
#include "steps/setting.hpp"

namespace jigwright {

/// The board under test as the plan's [board] table states it: what settling and ranges are computed from.
struct BoardFacts {
  struct Range {
    std::string id;  ///< "x100"; its relays are the jig's of role range
    double gain{};   ///< nominal, V/V
    SourceRegion region;
  };
  std::string product;
  double rail_V{};         ///< supply, symmetrical
  double limit_A{};        ///< supply current limit
  double swing_V{};        ///< largest output, less than the rail
  double output_ohm{};     ///< largest output resistance that a load is charged through, for settling
  double output_A{};       ///< least output current, for charging a load to an output level
  double unpowered_ohm{};  ///< OUT to GND without power (feedback network)
  double settle_s{};       ///< the board's own settling after any change
  double warm_up_s{};      ///< after power-up, before the first powered reading that counts
  std::vector<Range> ranges;
  const Range* range(std::string_view id) const;
};

/// What the plan's other parts give a step.
struct StepContext {
  std::shared_ptr<const Jig> jig;
  BoardFacts board;
  int index{};  ///< of the step in the plan
};

/// How much of a sweep a board gets. Stored; never renumbered.
enum class Depth : std::uint8_t { shortened = 0, full = 1 };

struct Expansion {
  std::vector<Setting> settings;
  std::vector<Metric> metrics;  ///< all that reduce() can find at this depth, `name.step` filled
};

class Step {
 public:
  virtual ~Step() = default;
  /// All that the step may set and read, the superset: the player may stop or skip, never add.
  virtual Expansion expand(Depth depth) const = 0;
  /// @param records  of this step's settings played so far, in the order played; those of later phases may be missing
  /// @param settings the whole trial's list, into which the records point; a record is found by its setting's
  ///        `position`, and only records of this step are handed in
  /// @return findings for every metric whose settings are all present (its `metric` is an index into this step's
  ///         Expansion::metrics of the same depth); a present setting with bad readings yields a finding with its state
  virtual std::vector<Finding> reduce(Depth depth, std::span<const SettingRecord> records,
                                      std::span<const Setting> settings) const = 0;

  std::string id;  ///< unique in the plan
  std::string_view kind;
  SourceRegion region;
  std::string next_action;  ///< the plan's own text for the operator when this step misses; may be empty
};

struct StepKind {
  std::string_view name;     ///< `kind = "..."` in the plan
  int reduce_version;        ///< stored with each trial; a changed reduce is a new version
  std::string_view summary;  ///< one line for lint and docs
  /// Reads the step's own keys; `id`, `kind`, `next_action` are read by the caller. Faults go to the reader.
  std::unique_ptr<Step> (*read)(TableReader& reader, const StepContext& context);
};

/// The visible table: steps/kinds.cpp.
std::span<const StepKind> step_kinds();
const StepKind* step_kind(std::string_view name);

}  // namespace jigwright
