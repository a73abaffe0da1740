// read_limits_tree(): limits.toml as a list of entries, each with its guard band applied.
#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "sequencer/plan.hpp"

namespace jigwright {
namespace {

const std::vector<std::string>& guard_words() {
  static const std::vector<std::string> words{"uncertainty", "inset", "typed", "none"};  // in the order of Guard
  return words;
}

/// One [[limit]]. Every quantity of it has the unit of the first that was read.
class EntryReader {
 public:
  EntryReader(const Node& node, Faults& faults) : r_(node, "[[limit]]", faults) { entry_.region = node.region; }

  std::optional<LimitEntry> read() {
    const std::size_t before = r_.faults().count(Severity::fault);
    read_names();
    read_specification();
    read_nominal();
    read_guard();
    r_.finish();
    if (r_.faults().count(Severity::fault) == before) apply();
    if (r_.faults().count(Severity::fault) != before) return std::nullopt;
    return std::move(entry_);
  }

 private:
  void read_names() {
    const auto step = r_.need_text("step");
    const auto metric = r_.need_text("metric");
    entry_.step = step.value;
    entry_.step_region = step.region;
    entry_.metric = metric.value;
    entry_.metric_region = metric.region;
    if (!entry_.step.empty() && !entry_.metric.empty())
      r_.rename(fmt::format("limit for {}: {}", entry_.step, entry_.metric));
    if (!r_.has("variants")) return;
    for (const auto& v : r_.need_texts("variants")) {
      if (std::find(entry_.variants.begin(), entry_.variants.end(), v.value) != entry_.variants.end())
        r_.fault(v.region, fmt::format("variant \"{}\" is named twice", v.value), "name each variant once");
      entry_.variants.push_back(v.value);
      entry_.variant_regions.push_back(v.region);
    }
  }

  void read_specification() {
    specification_ = r_.region();
    if (!r_.has("specification")) {
      r_.fault(r_.region(), "\"specification\" is missing",
               "add specification = { low = \"...\", high = \"...\" }; either may be left out");
      return;
    }
    entry_.limit.specification = read_bounds("specification", specification_);
  }

  /// A table { low, high }; either may be absent, not both.
  Bounds read_bounds(std::string_view key, SourceRegion& region) {
    Bounds out;
    const Node* table = r_.table(key);
    if (table == nullptr) return out;
    region = table->region;
    TableReader r(*table, fmt::format("{}: {}", r_.about(), key), r_.faults());
    out.low = agreeing(r, "low");
    out.high = agreeing(r, "high");
    if (!r.has("low") && !r.has("high"))
      r.fault(table->region, "no bound is given", "give low, high or both, as in { low = \"-0.5 mV\" }");
    r.finish();
    return out;
  }

  /// A quantity in the entry's unit, which the first one sets.
  std::optional<double> agreeing(TableReader& r, std::string_view key) {
    const auto q = r.any_quantity(key);
    if (!q) return std::nullopt;
    if (!unit_) {
      unit_ = entry_.unit = q->value.unit;
      unit_from_ = key;
      unit_region_ = q->region;
    }
    if (q->value.unit == *unit_) return q->value.value;
    if (*unit_ == Unit::count) return first_without_unit(key, *q);
    r.fault(q->region,
            fmt::format("\"{}\": expected {} as in \"{}\", found {}", key, quantity_name(*unit_), unit_from_,
                        quantity_name(q->value.unit)),
            "all quantities of a limit have the metric's unit");
    return std::nullopt;
  }

  /// The first quantity is a bare number and this one is not: the first wants the unit.
  std::optional<double> first_without_unit(std::string_view key, const Located<Quantity>& q) {
    r_.fault(unit_region_,
             fmt::format("\"{}\" has no unit, but \"{}\" is {}", unit_from_, key, quantity_name(q.value.unit)),
             fmt::format("write the unit, as in \"1.5 {}\"", symbol(q.value.unit)));
    unit_ = entry_.unit = q.value.unit;
    unit_from_ = key;
    unit_region_ = q.region;
    return q.value.value;
  }

  void read_nominal() {
    if (!r_.has("nominal")) return;
    const auto nominal = agreeing(r_, "nominal");
    if (!nominal) return;
    const Bounds& s = entry_.limit.specification;
    const bool crossed = s.low && s.high && *s.low > *s.high;
    if (!crossed && ((s.low && *nominal < *s.low) || (s.high && *nominal > *s.high)))
      r_.fault(r_.node("nominal")->region,
               fmt::format("the nominal {} lies outside the specification", format_quantity(*nominal, entry_.unit, 6)),
               "the nominal is what a perfect board shows");
    entry_.limit.nominal = *nominal;
  }

  void read_guard() {
    Limit& limit = entry_.limit;
    const auto word = r_.choice("guard", guard_words());
    known_guard_ = word || !r_.has("guard");
    if (word)
      limit.guard = static_cast<Guard>(std::find(guard_words().begin(), guard_words().end(), word->value) -
                                       guard_words().begin());
    read_budget();
    read_budget_of_reading();
    read_share();
    read_inset();
    read_typed();
    read_reason();
  }

  bool guard_is(Guard guard) const { return known_guard_ && entry_.limit.guard == guard; }

  /// A key that belongs to one way of guarding.
  void only_with(std::string_view key, Guard guard) {
    if (!r_.has(key) || !known_guard_ || entry_.limit.guard == guard) return;
    r_.fault(r_.node(key)->region,
             fmt::format("\"{}\" means nothing with guard = \"{}\"", key,
                         guard_words()[static_cast<std::size_t>(entry_.limit.guard)]),
             fmt::format("take it out, or write guard = \"{}\"", guard_words()[static_cast<std::size_t>(guard)]));
  }

  void read_budget() {
    const bool there = r_.has("uncertainty");
    if (!there && guard_is(Guard::uncertainty)) {
      r_.fault(r_.region(), "\"uncertainty\" is missing, and the guard band comes from it",
               "add uncertainty = \"...\", the budgeted expanded uncertainty (k = 2); or write guard = \"none\" with a "
               "reason");
      return;
    }
    const auto budget = agreeing(r_, "uncertainty");
    if (!budget) return;
    const bool positive = guard_is(Guard::uncertainty) ? *budget > 0 : *budget >= 0;
    if (!positive)
      r_.fault(r_.node("uncertainty")->region,
               fmt::format("\"uncertainty\": expected {}, found {}",
                           guard_is(Guard::uncertainty) ? "more than zero" : "zero or more",
                           format_quantity(*budget, entry_.unit, 6)),
               "it is the budgeted expanded uncertainty (k = 2)");
    entry_.limit.budget_U = *budget;
  }

  /// The part of the budget that grows with the reading; it adds to the constant part and can't stand alone.
  void read_budget_of_reading() {
    const auto of_reading = r_.quantity("uncertainty_of_reading", Unit::ratio);
    if (!of_reading) return;
    if (!r_.has("uncertainty") && !guard_is(Guard::uncertainty))
      r_.fault(of_reading->region, "\"uncertainty_of_reading\" stands without \"uncertainty\"",
               "add uncertainty = \"...\", the part that does not grow with the reading");
    if (!(of_reading->value >= 0 && of_reading->value < 1))
      r_.fault(of_reading->region,
               fmt::format("\"uncertainty_of_reading\": expected a ratio from 0 to 1, found {}", of_reading->value),
               "it is the part of the uncertainty that grows with the reading, as in \"2 %\"");
    entry_.limit.budget_of_reading = of_reading->value;
  }

  void read_share() {
    only_with("share", Guard::uncertainty);
    const auto share = r_.quantity("share", Unit::count);
    if (!share) return;
    if (!(share->value >= 0 && share->value <= 3))
      r_.fault(share->region, fmt::format("\"share\": expected a number from 0 to 3, found {}", share->value),
               "1 takes the whole uncertainty off each bound");
    entry_.limit.share = share->value;
  }

  void read_inset() {
    only_with("inset", Guard::inset);
    const auto inset = r_.has("inset") ? agreeing(r_, "inset") : std::nullopt;
    if (inset && *inset < 0)
      r_.fault(r_.node("inset")->region,
               fmt::format("\"inset\": expected zero or more, found {}", format_quantity(*inset, entry_.unit, 6)),
               "the test limit may not lie outside the specification");
    if (guard_is(Guard::inset) && !r_.has("inset"))
      r_.fault(r_.region(), "\"inset\" is missing", "add inset = \"...\", what is taken off each bound");
    entry_.limit.width = inset.value_or(0);
  }

  void read_typed() {
    only_with("test", Guard::typed);
    if (r_.has("test"))
      entry_.limit.applied = read_bounds("test", test_);
    else if (guard_is(Guard::typed))
      r_.fault(r_.region(), "\"test\" is missing", "add test = { low = \"...\", high = \"...\" }, the test limits");
  }

  void read_reason() {
    const bool needed = guard_is(Guard::typed) || guard_is(Guard::none);
    const bool there = r_.has("reason");
    if (needed && !there)
      r_.fault(r_.region(), "\"reason\" is missing",
               fmt::format("guard = \"{}\" needs one: add reason = \"...\"",
                           guard_words()[static_cast<std::size_t>(entry_.limit.guard)]));
    if (there) entry_.limit.reason = r_.need_text("reason").value;
  }

  void apply() {
    entry_.unit_region = unit_region_;
    auto applied = apply_guard(entry_.limit, entry_.unit);
    if (applied)
      entry_.limit = std::move(applied.value());
    else
      r_.fault(test_.source ? test_ : specification_, applied.error().what, applied.error().to_do);
  }

  TableReader r_;
  LimitEntry entry_;
  SourceRegion specification_, test_, unit_region_;
  std::optional<Unit> unit_;
  std::string_view unit_from_;
  bool known_guard_{true};
};

void read_head(TableReader& root, LimitSet& set, Faults& faults) {
  const Node* head = root.need_table("limits");
  if (head == nullptr) return;
  TableReader r(*head, "[limits]", faults);
  set.id = r.need_text("id").value;
  set.revision = r.need_integer("revision", 1, 1'000'000).value;
  set.reason = r.need_text("reason").value;
  set.by = r.need_text("by").value;
  r.finish();
}

}  // namespace

LimitSet read_limits_tree(const Node& root, Faults& faults) {
  LimitSet set;
  set.source = root.region.source;
  TableReader r(root, "", faults);
  read_head(r, set, faults);
  const auto tables = r.tables("limit");
  if (tables.empty() && !r.has("limit"))
    r.warning(root.region, "no [[limit]] is written: only what the steps state themselves is judged");
  for (const Node* table : tables)
    if (auto entry = EntryReader(*table, faults).read()) set.entries.push_back(std::move(*entry));
  r.finish();
  return set;
}

}  // namespace jigwright
