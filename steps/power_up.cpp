// Kind "power-up": the resistance of each rail to ground without power, so that a short is found before current flows;
// then power with the board's current limit, its warm-up, and each rail at the board's own pad by the meter.
// Keys: rail_settle (ten times the board's settling: rail capacitors charge from the meter's test current), readings
// (4), integration_cycles (1).
#include <fmt/format.h>

#include <array>

#include "steps/common.hpp"
#include "steps/kinds.hpp"

namespace jigwright {
namespace {

struct Rail {
  const char* name;
  Role role;
};
constexpr std::array<Rail, 2> rails{{{"+V", Role::meter_to_rail_pos}, {"-V", Role::meter_to_rail_neg}}};
constexpr double resistance_range_ohm = 10e3;
/// Room above the nominal rail for the meter's range.
constexpr double rail_headroom = 1.1;

class PowerUpStep final : public Step {
 public:
  void lay_out(const StepContext& context, double rail_settle_s, const MeterUse& use) {
    use_ = use;
    ohm_range_ = context.jig->resistance_range(resistance_range_ohm);
    volt_range_ = context.jig->voltage_range(context.board.rail_V * rail_headroom);
    layout_ = Layout(context);
    add_resistances(context, rail_settle_s);
    add_warm_up(context);
    add_rails(context);
  }

  Expansion expand(Depth) const override { return layout_.named(id); }

  std::vector<Finding> reduce(Depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Records played(records, settings, layout_.settings());
    std::vector<Finding> out;
    for (const Entry& e : entries_) {
      const auto read = played.sample(e.position);
      if (!read) continue;
      const Accuracy& range = e.resistance ? ohm_range_ : volt_range_;
      out.push_back(found(e.metric, read->state, read->mean, u(range, *read), read->n));
    }
    return out;
  }

 private:
  struct Entry {
    int position;
    int metric;
    bool resistance;
  };

  void add_resistances(const StepContext& context, double rail_settle_s) {
    for (const Rail& rail : rails) {
      Setting s =
          unpowered_setting(context, std::string("resistance/") + rail.name, std::string("resistance of ") + rail.name);
      join(s, *context.jig, rail.role);
      s.settle_s = rail_settle_s;
      s.act = use_.on(ohm_range_, MeterFunction::resistance);
      s.stop = Fixed{use_.readings};
      const int position = layout_.add(std::move(s));
      entries_.push_back({position, layout_.metric("rail_resistance", rail.name, Unit::ohm, About::board), true});
    }
  }

  void add_warm_up(const StepContext& context) {
    Setting s = powered_setting(context, "warm-up", "warm-up");
    short_input(s, *context.jig);
    s.resources |= use_supply;
    s.settle_s = context.board.warm_up_s;
    layout_.add(std::move(s));
  }

  void add_rails(const StepContext& context) {
    for (const Rail& rail : rails) {
      Setting s = powered_setting(context, std::string("rail/") + rail.name, std::string("rail ") + rail.name);
      s.group = 1;
      short_input(s, *context.jig);
      join(s, *context.jig, rail.role);
      s.act = use_.on(volt_range_);
      s.stop = Fixed{use_.readings};
      const int position = layout_.add(std::move(s));
      entries_.push_back({position, layout_.metric("rail", rail.name, Unit::volt, About::board), false});
    }
  }

  double u(const Accuracy& range, const Sample& sample) const {
    return Combined()
        .add(specified(range, sample.mean))
        .add(scatter(sample.sd, sample.n, use_.noise(range)))
        .add(rounding(range.resolution))
        .u();
  }

  MeterUse use_;
  Accuracy ohm_range_, volt_range_;
  std::vector<Entry> entries_;
  Layout layout_;
};

void check_supply(TableReader& reader, const StepContext& context) {
  if (context.jig == nullptr || !(context.jig->supply.max_V > 0)) return;
  const SupplyFacts& supply = context.jig->supply;
  if (context.board.rail_V > supply.max_V)
    reader.fault(
        reader.region(),
        fmt::format("the board's rail of {} is beyond the supply", format_quantity(context.board.rail_V, Unit::volt)),
        fmt::format("the jig's supply reaches {}", format_quantity(supply.max_V, Unit::volt)));
  if (context.board.limit_A > supply.max_A)
    reader.fault(reader.region(),
                 fmt::format("the board's current limit of {} is beyond the supply",
                             format_quantity(context.board.limit_A, Unit::ampere)),
                 fmt::format("the jig's supply reaches {}", format_quantity(supply.max_A, Unit::ampere)));
}

}  // namespace

std::unique_ptr<Step> read_power_up(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<PowerUpStep>();
  for (const Rail& rail : rails) need_role(reader, context, rail.role);
  need_role(reader, context, Role::supply_to_board);
  check_supply(reader, context);
  const auto settle = reader.quantity("rail_settle", Unit::second, Plausible{1e-4, 5});
  const MeterUse use = read_meter_use(reader, context, 4);
  if (clean.ok()) step->lay_out(context, settle ? settle->value : 10 * context.board.settle_s, use);
  return step;
}

}  // namespace jigwright
