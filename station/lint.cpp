// `jigwright lint`: every fault of plan, jig and limits; then what the plan will do: settings, time, relay moves,
// cautions.
#include <fmt/format.h>

#include <cmath>
#include <cstdio>
#include <map>
#include <nlohmann/json.hpp>

#include "base/source.hpp"
#include "sequencer/plan.hpp"
#include "sequencer/transition.hpp"
#include "station/commands.hpp"
#include "station/exit_codes.hpp"

namespace jigwright {
namespace {

struct SettingCost {
  const Setting* setting;
  double moving_s;
  double settle_s;  ///< only what follows a change
  double reading_s;
  int moves;
  int readings;
};

int usual_readings(const StopRule& rule) {
  if (const auto* fixed = std::get_if<Fixed>(&rule)) return fixed->n;
  return std::get<Stable>(rule).window;
}

std::vector<SettingCost> costs(const ReadyPlan& plan) {
  const SwitchingRules rules(*plan.jig);
  std::vector<SettingCost> out;
  NestState state;
  for (const Setting& s : plan.full.settings) {
    if (s.only_if_doubtful) continue;
    const Transition t = transition(state, s, rules);
    SettingCost c{&s, transition_s(t, rules), 0, 0, moves(t), usual_readings(s.stop)};
    c.settle_s = t.any() ? s.settle_s : 0;
    c.reading_s = std::max(0.0, s.usual_s - s.settle_s);
    out.push_back(c);
    state = after(s);
  }
  return out;
}

struct Total {
  int settings{}, readings{}, moves{};
  double moving_s{}, settle_s{}, reading_s{};
  double all_s() const { return moving_s + settle_s + reading_s; }
  void add(const SettingCost& c) {
    ++settings;
    readings += c.readings;
    moves += c.moves;
    moving_s += c.moving_s;
    settle_s += c.settle_s;
    reading_s += c.reading_s;
  }
};

std::string time_text(double s) {
  return format_quantity(s, Unit::second, 3);
}

/// What the loads can hold at the highest voltage that the plan lets them see.
struct Stored {
  double charge_C{}, energy_J{}, voltage_V{}, capacitance_F{};
};
Stored stored(const ReadyPlan& plan) {
  Stored out;
  out.voltage_V = plan.plan.board.rail_V;
  for (const Load& load : plan.jig->loads) out.capacitance_F += load.capacitance_F;
  out.charge_C = out.capacitance_F * out.voltage_V;
  out.energy_J = out.charge_C * out.voltage_V / 2;
  return out;
}

/// Thresholds after IEC 61010-1 6.3 (60 V d.c.; above it 45 uC of stored charge), quoted as pointers: editions differ.
std::string caution(const Stored& s) {
  std::string out =
      fmt::format("Loads together {} at up to {} (the rail): {}, {}.\n",
                  format_quantity(s.capacitance_F, Unit::farad, 3), format_quantity(s.voltage_V, Unit::volt, 3),
                  format_quantity(s.charge_C, Unit::coulomb, 3), format_quantity(s.energy_J, Unit::joule, 3));
  if (s.voltage_V <= 60)
    out += "That is below 60 V d.c., which IEC 61010-1 6.3 takes as not hazardous live in dry conditions.\n";
  else if (s.charge_C > 45e-6)
    out +=
        "That PASSES 60 V d.c. and 45 uC of stored charge (IEC 61010-1 6.3): hazardous live. Guard, bleed and "
        "interlock it.\n";
  else
    out += "That passes 60 V d.c. but stays within 45 uC of stored charge (IEC 61010-1 6.3).\n";
  out +=
      "The hard-wired interlock is the safety; this program only adds to it. Charged loads and moving clamps can "
      "hurt:\n"
      "follow your local codes, and leave mains and interlock wiring to licensed practice.\n";
  return out;
}

void print_settings(const ReadyPlan& plan, const std::vector<SettingCost>& all) {
  static constexpr const char* phases[] = {"contact", "unpowered", "powered"};
  fmt::print("{:<44} {:<10} {:>6} {:>9} {:>9} {:>9} {:>9}\n", "setting", "phase", "relays", "relays'", "settling",
             "readings", "reading");
  fmt::print("{:<44} {:<10} {:>6} {:>9} {:>9} {:>9} {:>9}\n", "", "", "moved", "time", "", "", "time");
  for (const SettingCost& c : all)
    fmt::print("{:<44} {:<10} {:>6} {:>9} {:>9} {:>9} {:>9}\n", c.setting->id,
               phases[static_cast<int>(c.setting->phase)], c.moves, time_text(c.moving_s), time_text(c.settle_s),
               c.readings, time_text(c.reading_s));
  const auto doubtful = std::count_if(plan.full.settings.begin(), plan.full.settings.end(),
                                      [](const Setting& s) { return s.only_if_doubtful; });
  if (doubtful > 0)
    fmt::print("and {} re-reads of the known value, only where a step overloads or never settles\n", doubtful);
  fmt::print("\n");
}

void print_plan(const ReadyPlan& plan, bool brief) {
  const auto all = costs(plan);
  std::vector<Total> steps(plan.plan.steps.size());
  Total total;
  for (const SettingCost& c : all) {
    steps[static_cast<std::size_t>(c.setting->step)].add(c);
    total.add(c);
  }
  std::vector<int> metrics(steps.size()), limited(steps.size());
  for (std::size_t i = 0; i < plan.full.metrics.size(); ++i)
    for (std::size_t s = 0; s < steps.size(); ++s)
      if (plan.full.metrics[i].name.step == plan.plan.steps[s]->id) {
        ++metrics[s];
        limited[s] += plan.full.limits[i].has_value() ? 1 : 0;
      }
  fmt::print("{} ({})\n", plan.plan.title, plan.plan.id);
  fmt::print("jig \"{}\", {} nest{}; limit set \"{}\" revision {}\n\n", plan.jig->name, plan.jig->nests,
             plan.jig->nests == 1 ? "" : "s", plan.limits.id, plan.limits.revision);
  if (!brief) print_settings(plan, all);
  fmt::print("{:<16} {:<18} {:>8} {:>8} {:>8} {:>8} {:>7} {:>9}\n", "step", "kind", "settings", "readings", "findings",
             "limited", "relays", "time");
  for (std::size_t i = 0; i < steps.size(); ++i)
    fmt::print("{:<16} {:<18} {:>8} {:>8} {:>8} {:>8} {:>7} {:>9}\n", plan.plan.steps[i]->id, plan.plan.kinds[i]->name,
               steps[i].settings, steps[i].readings, metrics[i], limited[i], steps[i].moves,
               time_text(steps[i].all_s()));
  int all_limited = 0;
  for (const int n : limited) all_limited += n;
  fmt::print("{:<16} {:<18} {:>8} {:>8} {:>8} {:>8} {:>7} {:>9}\n", "together", "", total.settings, total.readings,
             plan.full.metrics.size(), all_limited, total.moves, time_text(total.all_s()));
  fmt::print("\nWhere the time goes: reading {}, settling and dwells {}, relays and instruments {}.\n",
             time_text(total.reading_s), time_text(total.settle_s), time_text(total.moving_s));
  fmt::print("At worst (every stop rule to its end, every known value re-read): {}; the plan's own limit is {}.\n",
             time_text(plan.full.worst_s), time_text(plan.plan.time_limit_s));
  fmt::print("\nCaution. {}", caution(stored(plan)));
}

void print_json(const ReadyPlan* plan, const Faults& faults) {
  nlohmann::ordered_json out;
  out["faults"] = nlohmann::ordered_json::array();
  for (const Fault& f : faults.all()) {
    static constexpr const char* names[] = {"note", "warning", "fault"};
    out["faults"].push_back({{"severity", names[static_cast<int>(f.severity)]},
                             {"where", where(f.region)},
                             {"what", f.what},
                             {"to_do", f.to_do}});
  }
  if (plan != nullptr) {
    out["plan"] = plan->plan.id;
    out["usual_s"] = plan->full.usual_s;
    out["worst_s"] = plan->full.worst_s;
    out["settings"] = nlohmann::ordered_json::array();
    for (const SettingCost& c : costs(*plan))
      out["settings"].push_back({{"id", c.setting->id},
                                 {"relays_moved", c.moves},
                                 {"moving_s", c.moving_s},
                                 {"settle_s", c.settle_s},
                                 {"readings", c.readings},
                                 {"reading_s", c.reading_s}});
    const Stored s = stored(*plan);
    out["stored"] = {{"voltage_V", s.voltage_V},
                     {"capacitance_F", s.capacitance_F},
                     {"charge_C", s.charge_C},
                     {"energy_J", s.energy_J}};
  }
  fmt::print("{}\n", out.dump(2));
}

}  // namespace

int lint(const LintOptions& options) {
  Faults faults;
  const auto plan = read_plan(options.plan, faults);
  if (options.json) {
    print_json(plan.get(), faults);
    return plan ? exit_go : exit_files;
  }
  fmt::print(stderr, "{}", render(faults));
  if (!plan) {
    fmt::print(stderr, "{} fault{}, {} warning{}: no relay moves until they are mended\n",
               faults.count(Severity::fault), faults.count(Severity::fault) == 1 ? "" : "s",
               faults.count(Severity::warning), faults.count(Severity::warning) == 1 ? "" : "s");
    return exit_files;
  }
  print_plan(*plan, options.brief);
  return exit_go;
}

}  // namespace jigwright
