// A plan made ready: plan.toml, jig.toml and limits.toml read together, steps expanded, every metric matched with its
// limit. Made once, then shared by all nests and trials; never changed. Reading does file input; the rest is pure.
#pragma once
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "base/source.hpp"
#include "db/trial_record.hpp"
#include "fixtures/jig.hpp"
#include "limits/limit.hpp"
#include "sequencer/serial.hpp"
#include "steps/step.hpp"

namespace jigwright {

/// How the line treats boards under this plan.
struct LineRules {
  int retests{1};         ///< trials after the first, until a repair or an engineer's leave; a VOID counts
  int stop_after{3};      ///< NO-GO or VOID in a row with the same cause stop the line
  int first_articles{0};  ///< first boards of an order whose records an engineer approves before the line goes on
};

/// What a plan of the jig's check is about: a thing in the nest with a serial of its own, and the plan that follows.
struct JigCheckPart {
  Purpose purpose{Purpose::board};  ///< board = no part of a check
  std::string serial;
  std::string place;  ///< asked of the operator: what to lay into the nest
  std::string next;   ///< plan file, resolved against the plan's folder; empty = the last part
  /// Of a reject sample: the step that it must miss, and the load, as the finding's variant begins.
  std::string must_miss, load;
  SourceRegion region;
};

struct Plan {
  std::string id;  ///< "bridge-amplifier-sweep"
  std::string title;
  std::string jig_file;  ///< resolved against the plan's folder
  std::string limits_file;
  BoardFacts board;
  SerialForm serial;
  LineRules line;
  JigCheckPart check;
  bool stop_at_first_miss{false};
  double time_limit_s{};  ///< a trial longer than this is ended as VOID
  std::vector<std::unique_ptr<Step>> steps;
  std::vector<const StepKind*> kinds;  ///< beside steps
  std::shared_ptr<const SourceText> source;
};

/// One [[limit]] of limits.toml before it meets the plan's metrics.
struct LimitEntry {
  std::string step, metric;
  std::vector<std::string> variants;  ///< empty = every variant of the metric
  SourceRegion region, step_region, metric_region, unit_region;
  std::vector<SourceRegion> variant_regions;  ///< beside variants
  Unit unit{Unit::count};
  Limit limit;
};

struct LimitSet {
  std::string id;
  std::int64_t revision{};
  std::string reason, by;  ///< of the revision
  std::vector<LimitEntry> entries;
  std::shared_ptr<const SourceText> source;
};

/// Settings and metrics of all steps at one depth, in playing order.
struct Expanded {
  std::vector<Setting> settings;  ///< arranged: phase, then the plan's step order, then arrange()'s order
  std::vector<Metric> metrics;    ///< of all steps; a step's own start at first_metric[step]
  std::vector<int> first_metric;
  std::vector<std::optional<Limit>> limits;  ///< beside metrics
  double usual_s{}, worst_s{};               ///< physical time of one nest
  std::int64_t readings{};                   ///< usual number
};

struct ReadyPlan {
  std::shared_ptr<const Jig> jig;
  Plan plan;
  LimitSet limits;
  Expanded full;
};

/// Reads all three files (the plan names the other two), reports every fault of all of them, and expands.
/// nullptr when any fault was added; warnings and notes may stand in `faults` all the same.
std::shared_ptr<const ReadyPlan> read_plan(const std::string& plan_path, Faults& faults);

/// The same from texts, as the store kept them; no file is read.
struct PlanTexts {
  std::shared_ptr<const SourceText> plan, jig, limits;
};
std::shared_ptr<const ReadyPlan> read_plan_texts(const PlanTexts& texts, Faults& faults);

/// The pieces, for tests and later readers. `folder` resolves the files that the plan names.
Plan read_plan_tree(const Node& root, const std::string& folder, std::shared_ptr<const Jig> jig, Faults& faults);
LimitSet read_limits_tree(const Node& root, Faults& faults);
/// Pure: expands every step, arranges, matches limits. A limit for a metric that no step finds is a fault; a metric
/// without a limit a note.
Expanded expand_plan(const Plan& plan, const Jig& jig, const LimitSet& limits, Depth depth, Faults& faults);

}  // namespace jigwright
