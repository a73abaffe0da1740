// Kind "identity": a resistor on the board's identity pad (without power), or a voltage there (with power), that only
// this product has. Keys: resistor or voltage, tolerance (a ratio of it), readings (2), integration_cycles (1).
#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "steps/common.hpp"
#include "steps/kinds.hpp"

namespace jigwright {
namespace {

class IdentityStep final : public Step {
 public:
  void lay_out(const StepContext& context, double declared, bool resistor, double tolerance, const MeterUse& use) {
    const Jig& jig = *context.jig;
    use_ = use;
    const double most = std::abs(declared) * (1 + tolerance);
    range_ = resistor ? jig.resistance_range(most) : jig.voltage_range(most);
    Setting s =
        resistor ? unpowered_setting(context, "resistor", "identity") : powered_setting(context, "voltage", "identity");
    short_input(s, jig);
    join(s, jig, Role::meter_to_identity);
    s.act = use_.on(range_, resistor ? MeterFunction::resistance : MeterFunction::dc_voltage);
    s.stop = Fixed{use_.readings};
    layout_ = Layout(context);
    layout_.add(std::move(s));
    const double room = std::abs(declared) * tolerance;
    layout_.nominal(
        layout_.metric("identity", "", resistor ? Unit::ohm : Unit::volt, About::jig, declared - room, declared + room),
        declared);
  }

  Expansion expand(Depth) const override { return layout_.named(id); }

  std::vector<Finding> reduce(Depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Records played(records, settings, layout_.settings());
    const auto read = played.sample(0);
    if (!read) return {};
    const double u = Combined()
                         .add(specified(range_, read->mean))
                         .add(scatter(read->sd, read->n, use_.noise(range_)))
                         .add(rounding(range_.resolution))
                         .u();
    return {found(0, read->state, read->mean, u, read->n)};
  }

 private:
  MeterUse use_;
  Accuracy range_;
  Layout layout_;
};

void check_reach(TableReader& reader, const StepContext& context, const Located<double>& declared, bool resistor) {
  if (context.jig == nullptr) return;
  const auto& ranges = resistor ? context.jig->meter.resistance : context.jig->meter.voltage;
  if (ranges.empty() || std::abs(declared.value) <= ranges.back().range) return;
  const Unit unit = resistor ? Unit::ohm : Unit::volt;
  reader.fault(declared.region, fmt::format("{} is beyond the meter", format_quantity(declared.value, unit)),
               fmt::format("the meter's largest range is {}", format_quantity(ranges.back().range, unit)));
}

}  // namespace

std::unique_ptr<Step> read_identity(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<IdentityStep>();
  need_role(reader, context, Role::meter_to_identity);
  const auto resistor = reader.quantity("resistor", Unit::ohm, Plausible{10, 10e6});
  const auto voltage = reader.quantity("voltage", Unit::volt, Plausible{-50, 50});
  const bool both = reader.has("resistor") == reader.has("voltage");
  if (both)
    reader.fault(reader.region(), "needs either \"resistor\" or \"voltage\"", "write resistor = \"4.99 kohm\", say");
  const auto tolerance = reader.need_quantity("tolerance", Unit::ratio, Plausible{1e-4, 0.5});
  const auto declared = resistor ? resistor : voltage;
  if (declared && !both) check_reach(reader, context, *declared, resistor.has_value());
  const MeterUse use = read_meter_use(reader, context, 2);
  if (clean.ok() && declared) step->lay_out(context, declared->value, resistor.has_value(), tolerance.value, use);
  return step;
}

}  // namespace jigwright
