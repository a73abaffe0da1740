// Kind "path-zero": what the meter reads over each of its paths to a copper short that joins all pads: the thermal EMF
// of the path's relays and probes, and the meter's own zero. After a dwell, for the EMF rises while a relay's coil
// warms it. Where the jig can exchange the meter's leads, each path is read both ways: half the difference is the
// path's, half the sum the meter's (with half the EMF of the relay that exchanges them in either). Keys: dwell ("5 s");
// readings (10); integration_cycles (1).
//
// Own bounds: path_emf_V for the path, the meter's accuracy bound for its zero, half known_path_emf_V in either;
// without the exchange, all of it together.
#include <cmath>

#include "steps/common.hpp"
#include "steps/kinds.hpp"

namespace jigwright {
namespace {

constexpr Role paths[] = {Role::meter_to_output, Role::meter_to_input, Role::meter_to_rail_pos, Role::meter_to_rail_neg,
                          Role::meter_to_identity};

struct Entry {
  int forward{-1}, reversed{-1};
  int path{-1}, zero{-1};
};

class PathZeroStep final : public Step {
 public:
  void lay_out(const StepContext& context, double dwell_s, const MeterUse& use) {
    use_ = use;
    range_ = context.jig->voltage_range(0);
    layout_ = Layout(context);
    for (const Role role : paths)
      if (context.jig->has(role)) add(context, role, dwell_s);
  }

  bool empty() const { return entries_.empty(); }

  Expansion expand(Depth) const override { return layout_.named(id); }

  std::vector<Finding> reduce(Depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Records played(records, settings, layout_.settings());
    std::vector<Finding> out;
    for (const Entry& e : entries_) {
      const auto forward = played.sample(e.forward);
      if (!forward) continue;
      if (e.zero < 0) {
        out.push_back(found(e.path, forward->state, forward->mean, alone_u(*forward), forward->n));
        continue;
      }
      if (const auto reversed = played.sample(e.reversed)) add_both(e, *forward, *reversed, out);
    }
    return out;
  }

 private:
  void add(const StepContext& context, Role role, double dwell_s) {
    const Jig& jig = *context.jig;
    const std::string name(role_name(role).substr(std::string_view("meter to ").size()));
    const bool both = jig.has(Role::meter_reversed);
    Entry e;
    e.forward = layout_.add(setting(context, name, role, dwell_s, false));
    const double emf_V = path_emf_V + known_path_emf_V / 2;
    const double zero_V = accuracy_bound(range_, 0) + known_path_emf_V;
    const double path_V = both ? emf_V : path_emf_V + zero_V;
    if (both) e.reversed = layout_.add(setting(context, name, role, 0, true));
    e.path = layout_.nominal(layout_.metric("path_zero", name, Unit::volt, About::jig, -path_V, path_V), 0);
    if (both) e.zero = layout_.nominal(layout_.metric("meter_zero", name, Unit::volt, About::jig, -zero_V, zero_V), 0);
    entries_.push_back(e);
  }

  Setting setting(const StepContext& context, const std::string& name, Role role, double dwell_s, bool reversed) {
    Setting s = unpowered_setting(context, name + (reversed ? "/reversed" : "/forward"),
                                  "zero of " + name + (reversed ? ", reversed" : ""));
    s.phase = Phase::contact;
    s.group = group_++;
    join(s, *context.jig, role);
    if (reversed) join(s, *context.jig, Role::meter_reversed);
    s.settle_s += dwell_s;
    s.act = use_.on(range_);
    s.stop = Fixed{use_.readings};
    return s;
  }

  double random_u(const Sample& sample) const {
    return Combined().add(scatter(sample.sd, sample.n, use_.noise(range_))).add(rounding(range_.resolution)).u();
  }

  double alone_u(const Sample& sample) const {
    return Combined().add(random_u(sample)).add(specified(range_, sample.mean)).u();
  }

  /// The meter's offset is in both readings alike: gone from their difference, whole in their sum.
  void add_both(const Entry& e, const Sample& a, const Sample& b, std::vector<Finding>& out) const {
    const FindingState state = worse(a.state, b.state);
    const double random = Combined().add(random_u(a), 0.5).add(random_u(b), 0.5).u();
    const double half_V = (a.mean - b.mean) / 2;
    const double swap = rectangular(known_path_emf_V / 2);
    const double path_u = Combined().add(random).add(specified_difference(range_, half_V)).add(swap).u();
    out.push_back(found(e.path, state, half_V, path_u, a.n + b.n));
    out.push_back(found(e.zero, state, (a.mean + b.mean) / 2, Combined().add(random).add(swap).u(), a.n + b.n));
  }

  MeterUse use_;
  Accuracy range_;
  std::vector<Entry> entries_;
  Layout layout_;
  int group_{0};
};

}  // namespace

std::unique_ptr<Step> read_path_zero(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<PathZeroStep>();
  const double dwell_s =
      reader.has("dwell") ? reader.need_not_negative("dwell", Unit::second, Plausible{0, 600}).value : 5;
  const MeterUse use = read_meter_use(reader, context, 10);
  if (!clean.ok()) return step;
  step->lay_out(context, dwell_s, use);
  if (step->empty())
    reader.fault(reader.region(), "the jig has no path of the meter to the board", "take the step out");
  return step;
}

}  // namespace jigwright
