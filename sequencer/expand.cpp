// expand_plan(): the steps' settings in playing order, the metrics of all steps, and the limit of each.
#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <set>

#include "base/nearest.hpp"
#include "sequencer/arrange.hpp"
#include "sequencer/plan.hpp"

namespace jigwright {
namespace {

bool reads_meter_volts(const Setting& s) {
  const auto* meter = std::get_if<ReadMeter>(&s.act);
  return meter != nullptr && meter->setup.function == MeterFunction::dc_voltage;
}

/// The jig's known value, read after a step's settings of one phase only if one of them overloaded or never settled: it
/// tells a sick board from a sick instrument.
Setting known_value(const Plan& plan, const Jig& jig, int step, Phase phase, const Setting& beside) {
  Setting s;
  s.id = fmt::format("{}/known value/{}", plan.steps[static_cast<std::size_t>(step)]->id, static_cast<int>(phase));
  s.shown = "known value";
  s.step = step;
  s.position = -1;
  s.phase = phase;
  s.group = -1;
  s.own = beside.own & ~beside.bus;
  s.bus = jig.relays_of(Role::meter_to_reference);
  s.supply = beside.supply;
  ReadMeter act;
  act.setup.range = jig.voltage_range(jig.reference_V).range;
  act.setup.integration_s = jig.plc_s();
  s.act = act;
  Fixed few;
  few.n = 3;
  s.stop = few;
  s.settle_s = 0.005;
  s.resources = use_meter;
  s.only_if_doubtful = true;
  s.worst_s = s.settle_s + 3 * (act.setup.integration_s + jig.meter.reading_overhead_s);
  return s;
}

void add_known_values(std::vector<Setting>& settings, const Plan& plan, const Jig& jig) {
  if (!jig.has(Role::meter_to_reference)) return;
  for (int step = 0; step < static_cast<int>(plan.steps.size()); ++step) {
    if (plan.kinds[static_cast<std::size_t>(step)]->name == "known-value") continue;
    for (const Phase phase : {Phase::unpowered, Phase::powered}) {
      const Setting* beside = nullptr;
      for (const Setting& s : settings)
        if (s.step == step && s.phase == phase && reads_meter_volts(s)) beside = &s;
      if (beside == nullptr) continue;
      Setting known = known_value(plan, jig, step, phase, *beside);
      settings.push_back(std::move(known));
    }
  }
}

std::vector<std::string> unique(std::vector<std::string> words) {
  std::set<std::string> seen;
  std::erase_if(words, [&](const std::string& w) { return !seen.insert(w).second; });
  return words;
}

std::string advice(const std::string& word, const std::vector<std::string>& known, std::string_view who) {
  const auto near = nearest(word, known);
  std::string out = fmt::format("{}: {}", who, known.empty() ? "none" : listed(known));
  return near ? fmt::format("write \"{}\"; {}", *near, out) : out;
}

class Matcher {
 public:
  Matcher(const Plan& plan, Expanded& expanded, Faults& faults) : plan_(plan), expanded_(expanded), faults_(faults) {
    expanded_.limits.resize(expanded_.metrics.size());
    owner_.resize(expanded_.metrics.size(), nullptr);
  }

  void match(const LimitEntry& entry) {
    const std::string about = fmt::format("limit for {}: {}", entry.step, entry.metric);
    std::vector<std::size_t> of_metric;
    std::vector<std::string> steps, names;
    for (const auto& step : plan_.steps) steps.push_back(step->id);
    for (std::size_t i = 0; i < expanded_.metrics.size(); ++i) {
      const MetricName& m = expanded_.metrics[i].name;
      if (m.step != entry.step) continue;
      names.push_back(m.name);
      if (m.name == entry.metric) of_metric.push_back(i);
    }
    if (std::find(steps.begin(), steps.end(), entry.step) == steps.end())
      return faults_.fault(entry.step_region, fmt::format("{}: the plan has no step \"{}\"", about, entry.step),
                           advice(entry.step, steps, "its steps"));
    if (of_metric.empty())
      return faults_.fault(entry.metric_region,
                           fmt::format("{}: step \"{}\" finds no metric \"{}\"", about, entry.step, entry.metric),
                           advice(entry.metric, unique(names), "it finds"));
    for (const std::size_t i : chosen(entry, of_metric, about)) put(entry, i, about);
  }

  /// Metrics that no entry names: the step's own bounds, or recorded only.
  void finish() {
    std::set<std::pair<std::string, std::string>> noted;
    for (std::size_t i = 0; i < expanded_.metrics.size(); ++i) {
      if (expanded_.limits[i]) continue;
      const Metric& m = expanded_.metrics[i];
      if (m.own_low || m.own_high) {
        expanded_.limits[i] = own_limit(m);
        continue;
      }
      if (!noted.insert({m.name.step, m.name.name}).second) continue;
      faults_.note(step_region(m.name.step),
                   fmt::format("step \"{}\": metric \"{}\" has no limit{}", m.name.step, m.name.name,
                               m.name.variant.empty() ? "" : " for at least one variant"),
                   "it is recorded only");
    }
  }

 private:
  std::vector<std::size_t> chosen(const LimitEntry& entry, const std::vector<std::size_t>& of_metric,
                                  const std::string& about) {
    if (entry.variants.empty()) return of_metric;
    std::vector<std::size_t> out;
    for (std::size_t v = 0; v < entry.variants.size(); ++v) {
      const std::string& variant = entry.variants[v];
      std::vector<std::string> known;
      bool found = false;
      for (const std::size_t i : of_metric) {
        known.push_back(expanded_.metrics[i].name.variant);
        if (known.back() != variant) continue;
        out.push_back(i);
        found = true;
      }
      if (!found)
        faults_.fault(entry.variant_regions[v], fmt::format("{}: no variant \"{}\"", about, variant),
                      advice(variant, known, "its variants"));
    }
    return out;
  }

  void put(const LimitEntry& entry, std::size_t i, const std::string& about) {
    const Metric& m = expanded_.metrics[i];
    if (m.unit != entry.unit)
      return faults_.fault(
          entry.unit_region,
          fmt::format("{}: expected {}, found {}", about, quantity_name(m.unit), quantity_name(entry.unit)),
          fmt::format("the metric is found in {}: write the limit so",
                      symbol(m.unit).empty() ? "plain numbers" : symbol(m.unit)));
    if (owner_[i] != nullptr)
      return faults_.fault(entry.region, fmt::format("{}: a second limit for \"{}\"", about, label(m.name)),
                           "the first stands at " + where(owner_[i]->region));
    owner_[i] = &entry;
    Limit limit = entry.limit;
    if (std::isnan(limit.nominal) && !std::isnan(m.nominal)) limit.nominal = m.nominal;
    if (std::isnan(limit.nominal) && limit.specification.low && limit.specification.high)
      limit.nominal = (*limit.specification.low + *limit.specification.high) / 2;
    expanded_.limits[i] = limit;
  }

  static Limit own_limit(const Metric& m) {
    Limit limit;
    limit.specification = {m.own_low, m.own_high};
    limit.applied = limit.specification;
    limit.guard = Guard::none;
    limit.reason = "stated by the plan's step";
    limit.nominal = m.nominal;
    if (std::isnan(limit.nominal) && m.own_low && m.own_high) limit.nominal = (*m.own_low + *m.own_high) / 2;
    return limit;
  }

  SourceRegion step_region(const std::string& id) const {
    for (const auto& step : plan_.steps)
      if (step->id == id) return step->region;
    return {plan_.source, 0, 0, 1};
  }

  const Plan& plan_;
  Expanded& expanded_;
  Faults& faults_;
  std::vector<const LimitEntry*> owner_;
};

void add_up(Expanded& expanded, const SwitchingRules& rules) {
  NestState state;
  for (const Setting& s : expanded.settings) {
    if (s.only_if_doubtful) {
      expanded.worst_s += s.worst_s;
      continue;
    }
    const double moving_s = transition_s(transition(state, s, rules), rules);
    expanded.usual_s += moving_s + s.usual_s;
    expanded.worst_s += moving_s + s.worst_s;
    expanded.readings +=
        std::holds_alternative<Fixed>(s.stop) ? std::get<Fixed>(s.stop).n : std::get<Stable>(s.stop).window;
    state = after(s);
  }
}

}  // namespace

Expanded expand_plan(const Plan& plan, const Jig& jig, const LimitSet& limits, Depth depth, Faults& faults) {
  Expanded expanded;
  std::vector<Setting> settings;
  for (std::size_t i = 0; i < plan.steps.size(); ++i) {
    Expansion e = plan.steps[i]->expand(depth);
    expanded.first_metric.push_back(static_cast<int>(expanded.metrics.size()));
    for (Metric& m : e.metrics) {
      m.name.step = plan.steps[i]->id;
      expanded.metrics.push_back(std::move(m));
    }
    for (std::size_t p = 0; p < e.settings.size(); ++p) {
      e.settings[p].step = static_cast<int>(i);
      e.settings[p].position = static_cast<int>(p);
      settings.push_back(std::move(e.settings[p]));
    }
  }
  add_known_values(settings, plan, jig);
  const SwitchingRules rules(jig);
  expanded.settings = arrange(std::move(settings), rules);
  add_up(expanded, rules);
  Matcher matcher(plan, expanded, faults);
  for (const LimitEntry& entry : limits.entries) matcher.match(entry);
  matcher.finish();
  return expanded;
}

}  // namespace jigwright
