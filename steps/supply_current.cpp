// Kind "supply-current": the current that the board takes from each rail, by the supply's own read-back, input shorted,
// no load. Keys: readings (5).
#include <array>

#include "steps/common.hpp"
#include "steps/kinds.hpp"

namespace jigwright {
namespace {

struct Rail {
  const char* name;
  SupplyQuantity quantity;
};
constexpr std::array<Rail, 2> rails{{{"+V", SupplyQuantity::positive_A}, {"-V", SupplyQuantity::negative_A}}};

class SupplyCurrentStep final : public Step {
 public:
  void lay_out(const StepContext& context, int readings) {
    supply_ = context.jig->supply;
    layout_ = Layout(context);
    for (const Rail& rail : rails) {
      Setting s = powered_setting(context, rail.name, std::string("current ") + rail.name);
      short_input(s, *context.jig);
      s.act = ReadSupply{rail.quantity};
      s.stop = Fixed{readings};
      layout_.add(std::move(s));
      layout_.metric("current", rail.name, Unit::ampere, About::board);
    }
  }

  Expansion expand(Depth) const override { return layout_.named(id); }

  std::vector<Finding> reduce(Depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Records played(records, settings, layout_.settings());
    std::vector<Finding> out;
    for (int i = 0; i < static_cast<int>(layout_.settings()); ++i)
      if (const auto read = played.sample(i)) out.push_back(found(i, read->state, read->mean, u(*read), read->n));
    return out;
  }

 private:
  double u(const Sample& sample) const {
    const double bound_A = supply_.current_of_reading * std::abs(sample.mean) + supply_.current_offset_A;
    return Combined().add(rectangular(bound_A)).add(scatter(sample.sd, sample.n, 0)).u();
  }

  SupplyFacts supply_;
  Layout layout_;
};

}  // namespace

std::unique_ptr<Step> read_supply_current(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<SupplyCurrentStep>();
  need_role(reader, context, Role::supply_to_board);
  const auto readings = reader.integer("readings", 1, 200);
  if (clean.ok()) step->lay_out(context, readings ? static_cast<int>(readings->value) : 5);
  return step;
}

}  // namespace jigwright
