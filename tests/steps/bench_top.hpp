// What the tests of steps share: the sample's jig and board, a step read from its table as a plan has it, and records
// made by hand: every setting played in the order given, each reading from a function of the setting and the time.
#pragma once
#include <doctest/doctest.h>

#include <functional>
#include <memory>
#include <string>
#include <vector>

#include "steps/step.hpp"

namespace jigwright::bench_top {

inline std::shared_ptr<const Jig> sample_jig() {
  static const std::shared_ptr<const Jig> jig = [] {
    Faults faults;
    const auto source = read_source(SOURCE_FOLDER "/sample-runs/jig.toml");
    const auto root = parse_toml(source.value(), faults);
    return std::make_shared<const Jig>(read_jig(*root, faults));
  }();
  return jig;
}

inline BoardFacts sample_board() {
  BoardFacts b;
  b.product = "three-range bridge amplifier";
  b.rail_V = 12;
  b.limit_A = 0.06;
  b.swing_V = 10;
  b.output_ohm = 60;
  b.output_A = 0.015;
  b.unpowered_ohm = 22e3;
  b.settle_s = 2e-3;
  b.warm_up_s = 0.3;
  b.ranges = {{"x1", 1, {}}, {"x10", 10, {}}, {"x100", 100, {}}};
  return b;
}

struct ReadStep {
  std::shared_ptr<Node> root;
  Faults faults;
  std::unique_ptr<Step> step;
  std::string report() const { return render(faults); }
};

inline ReadStep read_step(std::string_view kind, const std::string& keys, std::shared_ptr<const Jig> jig = sample_jig(),
                          BoardFacts board = sample_board()) {
  ReadStep out;
  auto source = std::make_shared<SourceText>(SourceText{"plan.toml", keys});
  const auto root = parse_toml(source, out.faults);
  REQUIRE(root);
  out.root = std::make_shared<Node>(*root);
  TableReader reader(*out.root, "step \"s\"", out.faults);
  const StepContext context{std::move(jig), std::move(board), 3};
  const StepKind* known = step_kind(kind);
  REQUIRE(known != nullptr);
  out.step = known->read(reader, context);
  reader.finish();
  out.step->id = "s";
  out.step->kind = known->name;
  return out;
}

using ValueOf = std::function<double(const Setting& setting, double at_s)>;

/// Plays all settings in order: settle, then each reading in the middle of its time.
inline std::vector<SettingRecord> play(const std::vector<Setting>& settings, const ValueOf& value_of) {
  std::vector<SettingRecord> out;
  double now_s = 0;
  for (std::size_t i = 0; i < settings.size(); ++i) {
    SettingRecord record;
    record.setting = static_cast<int>(i);
    record.started = from_seconds(now_s);
    now_s += settings[i].settle_s;
    Next next = Next::more;
    while (next == Next::more) {
      now_s += 0.01;
      record.readings.push_back({value_of(settings[i], now_s), from_seconds(now_s), ReadingState::ok});
      now_s += 0.01;
      next = decide(settings[i].stop, record.readings);
    }
    record.ended = next;
    out.push_back(std::move(record));
  }
  return out;
}

inline const Setting& setting(const Expansion& e, const std::string& id) {
  for (const Setting& s : e.settings)
    if (s.id == id) return s;
  FAIL("no setting " << id);
  return e.settings.front();
}

inline int metric(const Expansion& e, const std::string& name, const std::string& variant = {}) {
  for (std::size_t i = 0; i < e.metrics.size(); ++i)
    if (e.metrics[i].name.name == name && e.metrics[i].name.variant == variant) return static_cast<int>(i);
  FAIL("no metric " << name << " " << variant);
  return -1;
}

inline bool has(const std::vector<Finding>& findings, int metric_index) {
  for (const Finding& f : findings)
    if (f.metric == metric_index) return true;
  return false;
}

inline Finding finding(const Expansion& e, const std::vector<Finding>& findings, const std::string& name,
                       const std::string& variant = {}) {
  const int at = metric(e, name, variant);
  for (const Finding& f : findings)
    if (f.metric == at) return f;
  FAIL("no finding " << name << " " << variant);
  return {};
}

inline bool starts_with(const Setting& s, std::string_view text) {
  return s.id.starts_with(text);
}

inline bool closed(const Setting& s, Role role, std::string_view of = {}) {
  const RelaySet set = sample_jig()->relays_of(role, of);
  return set.any() && ((s.own | s.bus) & set) == set;
}

inline const std::string under_load_keys = R"(range = "x100"
loads = ["100 pF", "330 pF", "1 nF", "3.3 nF", "10 nF", "100 nF", "1 uF", "10 uF"]
levels = ["0 V", "5 V", "-5 V"]
readings = 10
bracket_every = 4
detector_dwell = "2 ms"
return_after = "200 ms"
power_up_loads = ["1 nF"]
settle_to = "5 uV"
proof_tolerance = "30 %"
)";

}  // namespace jigwright::bench_top
