// read_plan() and read_plan_tree(): plan.toml, and with it jig.toml and limits.toml, every fault of all three together.
#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <functional>

#include "base/nearest.hpp"
#include "sequencer/plan.hpp"

namespace jigwright {
namespace {

// Usual values, common practice, no source: a slip of m for M lies far outside.
constexpr Plausible rail_V{0.5, 60};
constexpr Plausible limit_A{1e-3, 10};
constexpr Plausible output_ohm{1e-3, 100e3};
constexpr Plausible output_A{10e-6, 10};
constexpr Plausible unpowered_ohm{10, 100e6};
constexpr Plausible settle_s{1e-6, 10};
constexpr Plausible warm_up_s{0, 600};
constexpr Plausible time_s{0.1, 3600};

/// A trial longer than this is VOID where the plan is silent.
constexpr double usual_time_limit_s = 600;

std::string folder_of(const std::string& path) {
  return path.substr(0, path.rfind('/') + 1);
}

std::string resolved(const std::string& folder, const std::string& file) {
  return file.empty() || file.starts_with('/') ? file : folder + file;
}

class PlanReader {
 public:
  PlanReader(const Node& root, std::string folder, std::shared_ptr<const Jig> jig, Faults& faults)
      : root_(root, "", faults), folder_(std::move(folder)), jig_(std::move(jig)), faults_(faults) {
    plan_.source = root.region.source;
  }

  Plan read() {
    read_head();
    read_board();
    read_line();
    read_steps();
    read_jig_check();
    root_.finish();
    check_power();
    return std::move(plan_);
  }

 private:
  void read_line() {
    if (root_.has("serial"))
      if (const Node* node = root_.need_table("serial")) plan_.serial = read_serial_form(*node, faults_);
    if (!root_.has("line")) return;
    const Node* node = root_.need_table("line");
    if (node == nullptr) return;
    TableReader r(*node, "[line]", faults_);
    if (const auto n = r.integer("retests", 0, 10)) plan_.line.retests = static_cast<int>(n->value);
    if (const auto n = r.integer("stop_after", 2, 100)) plan_.line.stop_after = static_cast<int>(n->value);
    if (const auto n = r.integer("first_articles", 0, 1000)) plan_.line.first_articles = static_cast<int>(n->value);
    r.finish();
  }

  void read_jig_check() {
    static const std::vector<std::string> words{"jig check", "reference board", "reject sample"};  // order of Purpose
    if (!root_.has("jig_check")) return;
    const Node* node = root_.need_table("jig_check");
    if (node == nullptr) return;
    TableReader r(*node, "[jig_check]", faults_);
    JigCheckPart& c = plan_.check;
    c.region = node->region;
    const auto word = r.need_choice("purpose", words);
    const auto at = std::find(words.begin(), words.end(), word.value) - words.begin();
    c.purpose = static_cast<Purpose>(1 + std::min<std::ptrdiff_t>(at, 2));
    c.serial = r.need_text("serial").value;
    c.place = r.need_text("place").value;
    if (const auto next = r.text("next")) c.next = resolved(folder_, next->value);
    if (c.purpose == Purpose::reject_sample) read_must_miss(r);
    r.finish();
  }

  void read_must_miss(TableReader& r) {
    const auto step = r.need_text("must_miss");
    plan_.check.must_miss = step.value;
    plan_.check.load = r.need_text("load").value;
    std::vector<std::string> ids;
    for (const auto& s : plan_.steps) ids.push_back(s->id);
    if (step.value.empty() || std::find(ids.begin(), ids.end(), step.value) != ids.end()) return;
    const auto near = nearest(step.value, ids);
    r.fault(step.region, fmt::format("the plan has no step \"{}\"", step.value),
            (near ? fmt::format("write \"{}\"; ", *near) : "") + "its steps: " + listed(ids));
  }

  void read_head() {
    const Node* node = root_.need_table("plan");
    if (node == nullptr) return;
    TableReader r(*node, "[plan]", faults_);
    plan_.id = r.need_text("id").value;
    if (const auto title = r.text("title")) plan_.title = title->value;
    plan_.jig_file = resolved(folder_, r.need_text("jig").value);
    plan_.limits_file = resolved(folder_, r.need_text("limits").value);
    if (const auto stop = r.boolean("stop_at_first_miss")) plan_.stop_at_first_miss = stop->value;
    plan_.time_limit_s =
        r.has("time_limit") ? r.need_positive("time_limit", Unit::second, time_s).value : usual_time_limit_s;
    r.finish();
  }

  // --- the board --------------------------------------------------------------------------------------------------

  void read_board() {
    const Node* node = root_.need_table("board");
    if (node == nullptr) return;
    TableReader r(*node, "[board]", faults_);
    BoardFacts& b = plan_.board;
    b.product = r.need_text("product").value;
    read_supply(r);
    b.output_ohm = r.need_positive("output_resistance", Unit::ohm, output_ohm).value;
    b.output_A = r.need_positive("output_current", Unit::ampere, output_A).value;
    b.unpowered_ohm = r.need_positive("unpowered_resistance", Unit::ohm, unpowered_ohm).value;
    b.settle_s = r.need_positive("settle", Unit::second, settle_s).value;
    b.warm_up_s = r.need_not_negative("warm_up", Unit::second, warm_up_s).value;
    read_ranges(r);
    r.finish();
  }

  void read_supply(TableReader& r) {
    BoardFacts& b = plan_.board;
    const auto rail = r.need_positive("rail", Unit::volt, rail_V);
    const auto limit = r.need_positive("current_limit", Unit::ampere, limit_A);
    const auto swing = r.need_positive("swing", Unit::volt);
    b.swing_V = swing.value;
    if (rail.value > 0 && swing.value >= rail.value)
      r.fault(swing.region,
              fmt::format("\"swing\": {} is not below the rail of {}", format_quantity(swing.value, Unit::volt),
                          format_quantity(rail.value, Unit::volt)),
              "no output reaches its own supply: write the largest output that the board must deliver");
    b.rail_V = jig_ ? within_reach(r, "rail", rail, jig_->supply.max_V, Unit::volt) : rail.value;
    b.limit_A = jig_ ? within_reach(r, "current_limit", limit, jig_->supply.max_A, Unit::ampere) : limit.value;
  }

  /// What is asked; after a fault the most that there is, so that steps need not tell it again.
  static double within_reach(TableReader& r, std::string_view key, const Located<double>& asked, double most,
                             Unit unit) {
    if (!(most > 0) || asked.value <= most) return asked.value;
    r.fault(asked.region,
            fmt::format("\"{}\": {} is more than the jig's supply gives", key, format_quantity(asked.value, unit)),
            fmt::format("its most is {}", format_quantity(most, unit)));
    return most;
  }

  void read_ranges(TableReader& board) {
    const auto tables = board.tables("range");
    if (tables.empty() && (!board.has("range") || board.node("range")->array() != nullptr))
      board.fault(board.region(), "no range is declared",
                  "add a table [[board.range]] with id and gain; a board without ranges has one, say \"x1\"");
    std::vector<Located<std::string>> seen;
    for (const Node* table : tables) {
      TableReader r(*table, "[[board.range]]", faults_);
      const auto id = r.need_id("range", seen);
      const double gain = read_gain(r);
      if (plan_.board.range(id.value) == nullptr) plan_.board.ranges.push_back({id.value, gain, id.region});
      r.finish();
    }
    check_default_range();
  }

  /// A plain number, or a ratio with its unit.
  double read_gain(TableReader& r) {
    const auto gain = r.any_quantity("gain");
    if (!r.has("gain")) r.fault(r.region(), "\"gain\" is missing", "add gain = 100, say");
    if (!gain) return 1;
    if (gain->value.unit != Unit::count && gain->value.unit != Unit::ratio)
      r.fault(gain->region, fmt::format("\"gain\": expected a ratio, found {}", quantity_name(gain->value.unit)),
              "write a plain number, as in gain = 100");
    else if (!(gain->value.value > 0))
      r.fault(gain->region, fmt::format("\"gain\": expected more than zero, found {}", gain->value.value),
              "write the size of the nominal gain");
    else
      return gain->value.value;
    return 1;
  }

  /// Only one range may go without relays: it is what the board does when none is closed.
  void check_default_range() {
    if (!jig_ || jig_->relays.empty()) return;
    const BoardFacts::Range* first = nullptr;
    for (const auto& range : plan_.board.ranges) {
      if (range.id.empty() || jig_->has(Role::range, range.id)) continue;
      if (first != nullptr) no_relay(range, *first);
      if (first == nullptr) first = &range;
    }
  }

  void no_relay(const BoardFacts::Range& range, const BoardFacts::Range& first) {
    const auto known = jig_->range_ids();
    const auto near = nearest(range.id, known);
    faults_.fault(
        range.region,
        fmt::format("range \"{}\": the jig has no relay with role \"range\" for it, nor for range \"{}\"", range.id,
                    first.id),
        fmt::format("{}one range alone may go without, as the board's default; the jig switches: {}",
                    near ? fmt::format("write \"{}\"; ", *near) : "", known.empty() ? "none" : listed(known)));
  }

  // --- the steps --------------------------------------------------------------------------------------------------

  void read_steps() {
    const auto tables = root_.tables("step");
    if (tables.empty() && (!root_.has("step") || root_.node("step")->array() != nullptr))
      root_.fault(root_.region(), "the plan has no step", "add a table [[step]] with id and kind");
    std::vector<Located<std::string>> seen;
    for (const Node* table : tables) {
      TableReader r(*table, "[[step]]", faults_);
      const auto id = r.need_id("step", seen);
      if (const StepKind* kind = read_kind(r)) add_step(r, *table, *kind, id.value);
    }
  }

  const StepKind* read_kind(TableReader& r) {
    std::vector<std::string> known;
    for (const StepKind& k : step_kinds()) known.emplace_back(k.name);
    const bool there = r.has("kind");
    const auto word = there ? r.choice("kind", known) : r.need_choice("kind", known);
    all_kinds_known_ &= there && word;
    return there && word ? step_kind(word->value) : nullptr;
  }

  void add_step(TableReader& r, const Node& table, const StepKind& kind, const std::string& id) {
    StepContext context;
    context.jig = jig_;
    context.board = plan_.board;
    context.index = static_cast<int>(plan_.steps.size());
    std::unique_ptr<Step> step = kind.read(r, context);
    const auto action = r.text("next_action");
    r.finish();
    step->id = id;
    step->kind = kind.name;
    step->region = table.region;
    if (action) step->next_action = action->value;
    plan_.steps.push_back(std::move(step));
    plan_.kinds.push_back(&kind);
  }

  // --- power only on a board whose contact is proved ---------------------------------------------------------------

  bool powered(std::size_t i) const {
    if (plan_.kinds[i]->name == "power-up") return true;
    const Expansion e = plan_.steps[i]->expand(Depth::full);
    return std::any_of(e.settings.begin(), e.settings.end(),
                       [](const Setting& s) { return s.phase == Phase::powered; });
  }

  /// Nothing is asked where a step of unknown kind may be the one that is missing.
  void check_power() {
    if (!all_kinds_known_) return;
    std::optional<std::size_t> first;
    for (std::size_t i = 0; i < plan_.steps.size() && !first; ++i)
      if (powered(i)) first = i;
    if (!first) return;
    const Step& step = *plan_.steps[*first];
    if (!has_kind("contact"))
      faults_.fault(step.region, fmt::format("step \"{}\" powers the board, but no step proves its contact", step.id),
                    "add a [[step]] with kind = \"contact\": about 0 V is also what an open probe looks like");
    if (plan_.kinds[*first]->name != "power-up") no_power_up(step);
  }

  void no_power_up(const Step& step) {
    if (has_kind("power-up"))
      faults_.fault(step.region, fmt::format("step \"{}\" powers the board before the power-up step does", step.id),
                    "move the step of kind \"power-up\" before it: shorts are looked for there");
    else
      faults_.fault(step.region, fmt::format("step \"{}\" powers the board, but no step powers it up", step.id),
                    "add a [[step]] with kind = \"power-up\" before it: shorts are looked for there");
  }

  bool has_kind(std::string_view name) const {
    return std::any_of(plan_.kinds.begin(), plan_.kinds.end(), [&](const StepKind* k) { return k->name == name; });
  }

  TableReader root_;
  std::string folder_;
  std::shared_ptr<const Jig> jig_;
  Faults& faults_;
  Plan plan_;
  bool all_kinds_known_{true};
};

/// The tree of a file that the plan names, or nothing; a file that can't be read is a fault at its name in the plan.
std::optional<Node> tree_of(const std::string& path, const SourceRegion& named, Faults& faults) {
  auto source = read_source(path);
  if (source) return parse_toml(source.value(), faults);
  faults.fault(named, fmt::format("{}: {}", path, source.error().what), source.error().to_do);
  return std::nullopt;
}

/// The text at [plan] KEY; nullptr unless it is one.
const Node* named_file(const Node& root, std::string_view key) {
  const Table* table = root.table();
  const Node* plan = table == nullptr ? nullptr : find(*table, "plan");
  const Node* file = plan == nullptr || plan->table() == nullptr ? nullptr : find(*plan->table(), key);
  return file == nullptr || file->text() == nullptr || file->text()->empty() ? nullptr : file;
}

std::optional<Node> named_tree(const Node& root, std::string_view key, const std::string& folder, Faults& faults) {
  const Node* file = named_file(root, key);
  if (file == nullptr) return std::nullopt;
  return tree_of(resolved(folder, *file->text()), file->region, faults);
}

/// A plan that can't end in time would make every board VOID.
void check_time(const ReadyPlan& ready, const Node& root, Faults& faults) {
  if (!(ready.full.usual_s > ready.plan.time_limit_s)) return;
  const Node* head = find(*root.table(), "plan");
  const Node* at = find(*head->table(), "time_limit");
  faults.fault(at == nullptr ? head->region : at->region,
               fmt::format("the plan takes {}, longer than its time limit of {}",
                           format_quantity(ready.full.usual_s, Unit::second, 3),
                           format_quantity(ready.plan.time_limit_s, Unit::second, 3)),
               "every trial would be VOID: raise time_limit, or ask less of the plan");
}

/// Expands what was read. Notes on metrics without a limit are worth telling only when no limit is at fault.
void expand(ReadyPlan& ready, bool limits_sound, Faults& faults) {
  Faults found;
  ready.full = expand_plan(ready.plan, *ready.jig, ready.limits, Depth::full, found);
  for (const Fault& f : found.all()) {
    if (f.severity == Severity::fault) faults.fault(f.region, f.what, f.to_do);
    if (f.severity == Severity::warning) faults.warning(f.region, f.what, f.to_do);
    if (f.severity == Severity::note && limits_sound && !found.any()) faults.note(f.region, f.what, f.to_do);
  }
}

}  // namespace

Plan read_plan_tree(const Node& root, const std::string& folder, std::shared_ptr<const Jig> jig, Faults& faults) {
  return PlanReader(root, folder, std::move(jig), faults).read();
}

namespace {

/// The tree of the file that the plan names at [plan] KEY, or nothing.
using TreeOf = std::function<std::optional<Node>(std::string_view key)>;

std::shared_ptr<const ReadyPlan> assemble(const Node& root, const std::string& folder, const TreeOf& tree,
                                          Faults& faults) {
  const std::size_t before = faults.count(Severity::fault);
  auto ready = std::make_shared<ReadyPlan>();
  if (const auto jig = tree("jig")) ready->jig = std::make_shared<const Jig>(read_jig(*jig, faults));
  ready->plan = read_plan_tree(root, folder, ready->jig, faults);
  const bool plan_sound = ready->jig && faults.count(Severity::fault) == before;
  const std::size_t before_limits = faults.count(Severity::fault);
  const auto limits = tree("limits");
  if (limits) ready->limits = read_limits_tree(*limits, faults);
  const bool limits_sound = limits && faults.count(Severity::fault) == before_limits;
  if (plan_sound && limits) expand(*ready, limits_sound, faults);
  if (faults.count(Severity::fault) == before) check_time(*ready, root, faults);
  if (faults.count(Severity::fault) != before) return nullptr;
  return ready;
}

}  // namespace

std::shared_ptr<const ReadyPlan> read_plan(const std::string& plan_path, Faults& faults) {
  const std::string folder = folder_of(plan_path);
  SourceRegion nowhere;
  const auto root = tree_of(plan_path, nowhere, faults);
  if (!root) return nullptr;
  return assemble(
      *root, folder, [&](std::string_view key) { return named_tree(*root, key, folder, faults); }, faults);
}

std::shared_ptr<const ReadyPlan> read_plan_texts(const PlanTexts& texts, Faults& faults) {
  const auto root = parse_toml(texts.plan, faults);
  if (!root) return nullptr;
  return assemble(
      *root, {}, [&](std::string_view key) { return parse_toml(key == "jig" ? texts.jig : texts.limits, faults); },
      faults);
}

}  // namespace jigwright
