// Kind "gain": the least-squares slope of output on input over levels of both polarities, both read by the same meter.
//
// Keys: ranges (all), outputs (levels at the output, at least two, both polarities), readings (2), integration_cycles
// (1).
//
// The order is symmetric in time: levels a b c c b a, input then output on the way out, output then input on the way
// back. The mean time of input and output is then the same at every level, and a drift linear in time shifts all means
// alike: it leaves the slope. The intercept of the fit is never used as the board's offset.
//
// Uncertainty: what scatters is combined as independent. Of the meter's accuracy, of_range is an offset that all
// readings of a range share: it leaves a slope; of_reading is a gain error that they share: it stays whole, however
// many levels are read. Input and output on one range share it, so that it leaves the ratio; on two ranges the two are
// taken as independent rectangular bounds. Linearity: the residual of largest size over the span of the outputs; shared
// errors leave it.
#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>

#include "base/summary.hpp"
#include "steps/common.hpp"
#include "steps/kinds.hpp"

namespace jigwright {
namespace {

constexpr std::size_t most_levels = 32;
/// Room above the nominal level for the meter's ranges.
constexpr double level_headroom = 1.05;

/// Positions of one level's four readings: out and back.
struct LevelReads {
  std::array<int, 2> input{-1, -1};
  std::array<int, 2> output{-1, -1};
};

struct RangeReads {
  double gain{};
  Accuracy input_range, output_range;
  std::vector<LevelReads> levels;
  int gain_metric{}, linearity_metric{};
};

/// Mean of a level's two visits.
struct LevelMean {
  FindingState state{FindingState::no_data};
  double value{};
  double u{};
  int n{};
};

class GainStep final : public Step {
 public:
  void lay_out(const StepContext& context, const std::vector<BoardFacts::Range>& ranges,
               const std::vector<double>& outputs_V, const MeterUse& use) {
    use_ = use;
    layout_ = Layout(context);
    for (const auto& range : ranges) add_range(context, range, outputs_V);
  }

  Expansion expand(Depth) const override { return layout_.named(id); }

  std::vector<Finding> reduce(Depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Records played(records, settings, layout_.settings());
    std::vector<Finding> out;
    for (const RangeReads& range : ranges_) reduce_range(range, played, out);
    return out;
  }

 private:
  void add_range(const StepContext& context, const BoardFacts::Range& range, const std::vector<double>& outputs_V) {
    double most_V = 0;
    for (const double v : outputs_V) most_V = std::max(most_V, std::abs(v) * level_headroom);
    RangeReads reads;
    reads.gain = range.gain;
    reads.output_range = context.jig->voltage_range(most_V);
    reads.input_range = context.jig->voltage_range(most_V / std::abs(range.gain));
    reads.levels.resize(outputs_V.size());
    for (std::size_t i = 0; i < outputs_V.size(); ++i) {
      reads.levels[i].input[0] = add_read(context, range, reads, outputs_V[i], true, "out");
      reads.levels[i].output[0] = add_read(context, range, reads, outputs_V[i], false, "out");
    }
    for (std::size_t i = outputs_V.size(); i-- > 0;) {
      reads.levels[i].output[1] = add_read(context, range, reads, outputs_V[i], false, "back");
      reads.levels[i].input[1] = add_read(context, range, reads, outputs_V[i], true, "back");
    }
    reads.gain_metric = layout_.nominal(layout_.metric("gain", range.id, Unit::ratio, About::board), range.gain);
    reads.linearity_metric = layout_.nominal(layout_.metric("linearity", range.id, Unit::ratio, About::board), 0);
    ranges_.push_back(std::move(reads));
  }

  /// Every reading is a group of its own: the order must stay symmetric.
  int add_read(const StepContext& context, const BoardFacts::Range& range, const RangeReads& reads, double level_V,
               bool input, const char* way) {
    const Jig& jig = *context.jig;
    const std::string level = level_text(level_V);
    const char* side = input ? "input" : "output";
    Setting s = powered_setting(context, fmt::format("{}/{}/{}/{}", range.id, level, way, side),
                                fmt::format("{} {} at {}", range.id, side, level));
    s.group = static_cast<int>(layout_.settings());
    join(s, jig, Role::range, range.id);
    join(s, jig, Role::source_to_input);
    join(s, jig, input ? Role::meter_to_input : Role::meter_to_output);
    s.source.dc_V = level_V / range.gain;
    s.act = use_.on(input ? reads.input_range : reads.output_range);
    s.stop = Fixed{use_.readings};
    return layout_.add(std::move(s));
  }

  std::optional<LevelMean> level_mean(const Records& played, const std::array<int, 2>& positions,
                                      const Accuracy& range) const {
    const auto a = played.sample(positions[0]);
    const auto b = played.sample(positions[1]);
    if (!a || !b) return std::nullopt;
    LevelMean mean;
    mean.state = worse(a->state, b->state);
    mean.value = (a->mean + b->mean) / 2;
    mean.n = a->n + b->n;
    mean.u = Combined()
                 .add(scatter(a->sd, a->n, use_.noise(range)), 0.5)
                 .add(scatter(b->sd, b->n, use_.noise(range)), 0.5)
                 .add(rounding(range.resolution))
                 .u();
    return mean;
  }

  void reduce_range(const RangeReads& range, const Records& played, std::vector<Finding>& out) const {
    std::array<double, most_levels> x{}, y{}, u{};
    FindingState state = FindingState::measured;
    int n = 0;
    const std::size_t levels = range.levels.size();
    for (std::size_t i = 0; i < levels; ++i) {
      const auto input = level_mean(played, range.levels[i].input, range.input_range);
      const auto output = level_mean(played, range.levels[i].output, range.output_range);
      if (!input || !output) return;
      state = worse(state, worse(input->state, output->state));
      n += input->n + output->n;
      x[i] = input->value;
      y[i] = output->value;
      u[i] = Combined().add(output->u).add(input->u, range.gain).u();
    }
    add_findings(range, state, {x.data(), levels}, {y.data(), levels}, {u.data(), levels}, n, out);
  }

  static void add_findings(const RangeReads& range, FindingState state, std::span<const double> x,
                           std::span<const double> y, std::span<const double> u, int n, std::vector<Finding>& out) {
    const auto line = state == FindingState::measured ? fit_line(x, y) : std::nullopt;
    if (!line) {
      if (state == FindingState::measured) state = FindingState::no_data;
      out.push_back(found(range.gain_metric, state, 0, 0, n));
      out.push_back(found(range.linearity_metric, state, 0, 0, n));
      return;
    }
    const auto [low, high] = std::minmax_element(y.begin(), y.end());
    const double span_V = *high - *low;
    const double worst_u = *std::max_element(u.begin(), u.end());
    out.push_back(found(range.gain_metric, state, line->slope, gain_u(range, *line, x, u), n));
    out.push_back(found(range.linearity_metric, state, line->worst_residual / span_V, worst_u / span_V, n));
  }

  static double gain_u(const RangeReads& range, const Line& line, std::span<const double> x,
                       std::span<const double> u) {
    const double slope = std::abs(line.slope);
    Combined all;
    all.add(std::max(line.u_slope, slope_noise(x, u)));
    if (range.input_range.range != range.output_range.range) {
      all.add(rectangular(range.output_range.of_reading), slope);
      all.add(rectangular(range.input_range.of_reading), slope);
    }
    return all.u();
  }

  /// What the levels' own uncertainties make of the slope: sqrt(sum (x - mean)^2 u^2) / sum (x - mean)^2, from
  /// slope = sum (x - mean) y / sum (x - mean)^2 and 5.1.2.
  static double slope_noise(std::span<const double> x, std::span<const double> u) {
    const double mean = summarize(x).mean;
    double squares = 0;
    Combined top;
    for (std::size_t i = 0; i < x.size(); ++i) {
      squares += (x[i] - mean) * (x[i] - mean);
      top.add(u[i], x[i] - mean);
    }
    return top.u() / squares;
  }

  MeterUse use_;
  std::vector<RangeReads> ranges_;
  Layout layout_;
};

void check_polarities(TableReader& reader, const std::vector<Located<double>>& outputs) {
  const Node* node = reader.node("outputs");
  if (node == nullptr) {
    reader.fault(reader.region(), "\"outputs\" is missing", "add outputs = [\"-8 V\", \"8 V\"], say");
    return;
  }
  if (node->array() != nullptr && outputs.size() != node->array()->size()) return;  // already a fault
  const bool up = std::any_of(outputs.begin(), outputs.end(), [](const auto& v) { return v.value > 0; });
  const bool down = std::any_of(outputs.begin(), outputs.end(), [](const auto& v) { return v.value < 0; });
  if (outputs.size() < 2 || !up || !down)
    reader.fault(node->region, "\"outputs\" needs levels of both polarities", "write [\"-8 V\", \"8 V\"], say");
  if (outputs.size() > most_levels)
    reader.fault(node->region, "\"outputs\" has too many levels", fmt::format("at most {}", most_levels));
}

std::vector<double> read_outputs(TableReader& reader, const StepContext& context,
                                 const std::vector<BoardFacts::Range>& ranges) {
  const auto outputs = reader.quantities("outputs", Unit::volt);
  check_polarities(reader, outputs);
  double least_gain = std::numeric_limits<double>::infinity();
  for (const auto& range : ranges) least_gain = std::min(least_gain, std::abs(range.gain));
  std::vector<double> out;
  for (const auto& level : outputs) {
    check_level(reader, context, level, std::isfinite(least_gain) ? least_gain : 0);
    if (std::find(out.begin(), out.end(), level.value) != out.end())
      reader.fault(level.region, fmt::format("output level {} is named twice", level_text(level.value)),
                   "name each level once");
    out.push_back(level.value);
  }
  return out;
}

bool gains_known(const std::vector<BoardFacts::Range>& ranges) {
  return std::all_of(ranges.begin(), ranges.end(), [](const auto& r) { return r.gain != 0; });
}

}  // namespace

std::unique_ptr<Step> read_gain(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<GainStep>();
  for (const Role role : {Role::source_to_input, Role::meter_to_input, Role::meter_to_output, Role::supply_to_board})
    need_role(reader, context, role);
  const auto ranges = read_ranges(reader, context);
  const auto outputs = read_outputs(reader, context, ranges);
  const MeterUse use = read_meter_use(reader, context, 2);
  if (clean.ok() && gains_known(ranges)) step->lay_out(context, ranges, outputs, use);
  return step;
}

}  // namespace jigwright
