// Kind "contact": the loop of force and sense pin over each pad, in ohm, before anything else touches the board. About
// 0 V is what a perfect offset looks like and also what an open probe looks like: so every probe of the jig is read.
// Then the meter's own paths to the board, for an open relay there reads about 0 V too: the output through the board's
// feedback network, and the input through the jig's short, where the jig has these relays.
// Keys: probes (all; leaving one out is a fault), max ("5 ohm"), readings (2), integration_cycles (1).
#include <fmt/format.h>

#include <algorithm>

#include "base/nearest.hpp"
#include "steps/common.hpp"
#include "steps/kinds.hpp"

namespace jigwright {
namespace {

/// A loop may read this much below nothing for the meter's own zero.
constexpr double low_ohm = -0.5;
/// The output's path is open beyond this times what the plan states from OUT to GND without power. No lower bound: a
/// shorted output is the board's fault, and other steps find it.
constexpr double open_path = 3;

class ContactStep final : public Step {
 public:
  void lay_out(const StepContext& context, const std::vector<std::string>& probes, double max_ohm,
               const MeterUse& use) {
    const Jig& jig = *context.jig;
    use_ = use;
    layout_ = Layout(context);
    for (const std::string& probe : probes) {
      Setting s = unpowered_setting(context, probe, probe);
      join(s, jig, Role::probe_loop, probe);
      add(std::move(s), jig.meter.resistance.front());
      layout_.nominal(layout_.metric("loop", probe, Unit::ohm, About::jig, low_ohm, max_ohm), 0);
    }
    if (jig.has(Role::meter_to_output)) add_output_path(context);
    if (jig.has(Role::meter_to_input) && jig.has(Role::input_short)) add_input_path(context, max_ohm);
  }

  Expansion expand(Depth) const override { return layout_.named(id); }

  std::vector<Finding> reduce(Depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Records played(records, settings, layout_.settings());
    std::vector<Finding> out;
    for (int i = 0; i < static_cast<int>(layout_.settings()); ++i)
      if (const auto loop = played.sample(i)) out.push_back(found(i, loop->state, loop->mean, u(i, *loop), loop->n));
    return out;
  }

 private:
  void add(Setting s, const Accuracy& range) {
    s.phase = Phase::contact;
    s.act = use_.on(range, MeterFunction::resistance);
    s.stop = Fixed{use_.readings};
    layout_.add(std::move(s));
    ranges_.push_back(range);
  }

  void add_output_path(const StepContext& context) {
    Setting s = unpowered_setting(context, "path to output", "path to output");
    join(s, *context.jig, Role::meter_to_output);
    add(std::move(s), context.jig->resistance_range(context.board.unpowered_ohm));
    layout_.nominal(
        layout_.metric("path", "output", Unit::ohm, About::jig, low_ohm, open_path * context.board.unpowered_ohm),
        context.board.unpowered_ohm);
  }

  void add_input_path(const StepContext& context, double max_ohm) {
    Setting s = unpowered_setting(context, "path to input", "path to input");
    join(s, *context.jig, Role::input_short);
    join(s, *context.jig, Role::meter_to_input);
    add(std::move(s), context.jig->meter.resistance.front());
    layout_.nominal(layout_.metric("path", "input", Unit::ohm, About::jig, low_ohm, max_ohm), 0);
  }

  double u(int setting, const Sample& sample) const {
    const Accuracy& range = ranges_[static_cast<std::size_t>(setting)];
    return Combined()
        .add(specified(range, sample.mean))
        .add(scatter(sample.sd, sample.n, use_.noise(range)))
        .add(rounding(range.resolution))
        .u();
  }

  MeterUse use_;
  std::vector<Accuracy> ranges_;  ///< by setting
  Layout layout_;
};

std::vector<std::string> probe_ids(const Jig& jig) {
  std::vector<std::string> out;
  for (const Probe& p : jig.probes) out.push_back(p.id);
  return out;
}

bool holds(const std::vector<std::string>& list, const std::string& word) {
  return std::find(list.begin(), list.end(), word) != list.end();
}

void unknown_probe(TableReader& reader, const Located<std::string>& name, const std::vector<std::string>& all) {
  const auto near = nearest(name.value, all);
  reader.fault(name.region, fmt::format("probe \"{}\" is not on this jig", name.value),
               fmt::format("the jig has: {}", listed(all)) + (near ? fmt::format("; write \"{}\"", *near) : ""));
}

/// The plan's order of the jig's probes; every one must be there once.
std::vector<std::string> read_probes(TableReader& reader, const std::vector<std::string>& all) {
  if (!reader.has("probes")) return all;
  std::vector<std::string> out;
  for (const auto& name : reader.texts("probes")) {
    if (!holds(all, name.value))
      unknown_probe(reader, name, all);
    else if (holds(out, name.value))
      reader.fault(name.region, fmt::format("probe \"{}\" is named twice", name.value), "name each probe once");
    else
      out.push_back(name.value);
  }
  std::vector<std::string> left_out;
  for (const auto& probe : all)
    if (!holds(out, probe)) left_out.push_back(probe);
  if (!left_out.empty())
    reader.fault(reader.node("probes")->region, fmt::format("\"probes\" leaves out: {}", listed(left_out)),
                 "an open probe looks like a perfect board: name every probe of the jig, or leave the key out");
  return out;
}

void check_loops(TableReader& reader, const Jig& jig, const std::vector<std::string>& probes) {
  for (const auto& probe : probes)
    if (!jig.has(Role::probe_loop, probe))
      reader.fault(reader.region(), fmt::format("probe \"{}\" has no relay with role \"probe loop\"", probe),
                   fmt::format("add a relay with role = \"probe loop\" and of = \"{}\" to the jig", probe));
}

/// Without a range that holds it, the output's path would read as open on every board.
void check_output_range(TableReader& reader, const StepContext& context) {
  if (!context.jig->has(Role::meter_to_output) || context.jig->meter.resistance.empty()) return;
  const Accuracy& range = context.jig->resistance_range(context.board.unpowered_ohm);
  if (context.board.unpowered_ohm <= range.overload * range.range) return;
  reader.fault(
      reader.region(),
      fmt::format("the meter's path to the output can't be proved: OUT is stated as {} without power, the meter's "
                  "largest resistance range is {}",
                  format_quantity(context.board.unpowered_ohm, Unit::ohm), format_quantity(range.range, Unit::ohm)),
      "add the meter's next resistance range to the jig");
}

}  // namespace

std::unique_ptr<Step> read_contact(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<ContactStep>();
  const auto all = context.jig ? probe_ids(*context.jig) : std::vector<std::string>{};
  const auto probes = read_probes(reader, all);
  if (context.jig) check_loops(reader, *context.jig, probes);
  if (context.jig) check_output_range(reader, context);
  const auto most = reader.quantity("max", Unit::ohm, Plausible{0.05, 100});
  if (most && !(most->value > 0)) reader.fault(most->region, "\"max\" must be more than 0 ohm", "write \"5 ohm\"");
  const MeterUse use = read_meter_use(reader, context, 2);
  if (clean.ok()) step->lay_out(context, probes, most ? most->value : 5.0, use);
  return step;
}

}  // namespace jigwright
