// Kind "source-check": the source at the board's input against the meter there, at levels of both signs, under power so
// that no junction of the input conducts, in the board's range of least gain.
// Keys: levels (at the input, of both signs); readings (4); integration_cycles (1).
//
// `source_error` is the mean less the level. Own bounds: the accuracy of the source as jig.toml declares it, the
// meter's there, and the thermal EMF of the meter's path.
#include <fmt/format.h>

#include <algorithm>
#include <cmath>

#include "steps/common.hpp"
#include "steps/kinds.hpp"

namespace jigwright {
namespace {

struct Entry {
  double level_V{};
  Accuracy range;
};

class SourceCheckStep final : public Step {
 public:
  void lay_out(const StepContext& context, const BoardFacts::Range& range, const std::vector<double>& levels_V,
               const MeterUse& use) {
    const Jig& jig = *context.jig;
    use_ = use;
    layout_ = Layout(context);
    for (const double level_V : levels_V) {
      const double source_V = jig.source.of_setting * std::abs(level_V) + jig.source.offset_V;
      const Accuracy& meter = jig.voltage_range(std::abs(level_V) + source_V);
      Setting s = powered_setting(context, level_text(level_V), "source at " + level_text(level_V));
      join(s, jig, Role::range, range.id);
      join(s, jig, Role::source_to_input);
      join(s, jig, Role::meter_to_input);
      s.source.dc_V = level_V;
      s.act = use_.on(meter);
      s.stop = Fixed{use_.readings};
      layout_.add(std::move(s));
      const double bound_V = source_V + accuracy_bound(meter, level_V) + path_emf_V;
      layout_.nominal(layout_.metric("source_error", level_text(level_V), Unit::volt, About::jig, -bound_V, bound_V),
                      0);
      entries_.push_back({level_V, meter});
    }
  }

  Expansion expand(Depth) const override { return layout_.named(id); }

  std::vector<Finding> reduce(Depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Records played(records, settings, layout_.settings());
    std::vector<Finding> out;
    for (std::size_t i = 0; i < entries_.size(); ++i)
      if (const auto read = played.sample(static_cast<int>(i)))
        out.push_back(found(static_cast<int>(i), read->state, read->mean - entries_[i].level_V,
                            u(entries_[i].range, *read), read->n));
    return out;
  }

 private:
  double u(const Accuracy& range, const Sample& sample) const {
    return Combined()
        .add(specified(range, sample.mean))
        .add(scatter(sample.sd, sample.n, use_.noise(range)))
        .add(rounding(range.resolution))
        .add(rectangular(path_emf_V))
        .u();
  }

  MeterUse use_;
  std::vector<Entry> entries_;
  Layout layout_;
};

const BoardFacts::Range* least_gain(const BoardFacts& board) {
  const auto at = std::min_element(board.ranges.begin(), board.ranges.end(),
                                   [](const auto& a, const auto& b) { return a.gain < b.gain; });
  return at == board.ranges.end() ? nullptr : &*at;
}

std::vector<double> read_levels(TableReader& reader, const StepContext& context, double gain) {
  std::vector<double> out;
  for (const auto& level : reader.quantities("levels", Unit::volt)) {
    check_level(reader, context, {level.value * gain, level.region}, gain);
    if (std::find(out.begin(), out.end(), level.value) != out.end())
      reader.fault(level.region, fmt::format("level {} is named twice", level_text(level.value)),
                   "name each level once");
    out.push_back(level.value);
  }
  const auto sign = [&](auto of) { return std::any_of(out.begin(), out.end(), of); };
  if (!sign([](double v) { return v > 0; }) || !sign([](double v) { return v < 0; }))
    reader.fault(reader.has("levels") ? reader.node("levels")->region : reader.region(),
                 "\"levels\" needs levels of both signs", "write levels = [\"-1 V\", \"-0.1 V\", \"0.1 V\", \"1 V\"]");
  return out;
}

}  // namespace

std::unique_ptr<Step> read_source_check(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<SourceCheckStep>();
  need_role(reader, context, Role::source_to_input);
  need_role(reader, context, Role::meter_to_input);
  const BoardFacts::Range* range = least_gain(context.board);
  const auto levels_V = read_levels(reader, context, range != nullptr ? range->gain : 1);
  const MeterUse use = read_meter_use(reader, context, 4);
  if (clean.ok() && range != nullptr) step->lay_out(context, *range, levels_V, use);
  return step;
}

}  // namespace jigwright
