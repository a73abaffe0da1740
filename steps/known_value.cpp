// Kind "known-value": the meter reads a copper short at its own terminals and the jig's reference, before anything is
// asked of the board, so that a sick instrument is told from a sick board. Keys: readings (5), integration_cycles (1).
//
// Own bounds: the meter's accuracy bound, the thermal EMF of the relay that joins it, and twice the reference's
// standard uncertainty.
#include "steps/common.hpp"
#include "steps/kinds.hpp"

namespace jigwright {
namespace {

class KnownValueStep final : public Step {
 public:
  void lay_out(const StepContext& context, const MeterUse& use) {
    const Jig& jig = *context.jig;
    use_ = use;
    reference_V_ = jig.reference_V;
    reference_u_V_ = jig.reference_u_V;
    zero_range_ = jig.meter.voltage.front();
    reference_range_ = jig.voltage_range(jig.reference_V);
    layout_ = Layout(context);
    layout_.add(setting(context, "zero", "meter's zero", Role::meter_to_zero, zero_range_));
    layout_.add(setting(context, "reference", "reference", Role::meter_to_reference, reference_range_));
    const double zero_bound_V = accuracy_bound(zero_range_, 0) + known_path_emf_V;
    const double bound_V = accuracy_bound(reference_range_, reference_V_) + known_path_emf_V + 2 * reference_u_V_;
    layout_.nominal(layout_.metric("meter_zero", "", Unit::volt, About::jig, -zero_bound_V, zero_bound_V), 0);
    layout_.nominal(layout_.metric("reference_error", "", Unit::volt, About::jig, -bound_V, bound_V), 0);
  }

  Expansion expand(Depth) const override { return layout_.named(id); }

  std::vector<Finding> reduce(Depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Records played(records, settings, layout_.settings());
    std::vector<Finding> out;
    if (const auto zero = played.sample(0))
      out.push_back(found(0, zero->state, zero->mean, u(zero_range_, *zero), zero->n));
    if (const auto read = played.sample(1)) out.push_back(reference_error(*read));
    return out;
  }

 private:
  Setting setting(const StepContext& context, std::string name, std::string shown, Role role,
                  const Accuracy& range) const {
    Setting s = unpowered_setting(context, std::move(name), std::move(shown));
    s.phase = Phase::contact;
    join(s, *context.jig, role);
    s.act = use_.on(range);
    s.stop = Fixed{use_.readings};
    return s;
  }

  double u(const Accuracy& range, const Sample& sample) const {
    return Combined()
        .add(specified(range, sample.mean))
        .add(scatter(sample.sd, sample.n, use_.noise(range)))
        .add(rounding(range.resolution))
        .add(rectangular(known_path_emf_V))
        .u();
  }

  Finding reference_error(const Sample& read) const {
    const double all = Combined().add(u(reference_range_, read)).add(reference_u_V_).u();
    return found(1, read.state, read.mean - reference_V_, all, read.n);
  }

  MeterUse use_;
  double reference_V_{}, reference_u_V_{};
  Accuracy zero_range_, reference_range_;
  Layout layout_;
};

}  // namespace

std::unique_ptr<Step> read_known_value(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<KnownValueStep>();
  need_role(reader, context, Role::meter_to_zero);
  need_role(reader, context, Role::meter_to_reference);
  const MeterUse use = read_meter_use(reader, context, 5);
  if (clean.ok()) step->lay_out(context, use);
  return step;
}

}  // namespace jigwright
