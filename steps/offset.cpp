// Kind "offset": the output of each range with the input shorted, less the path's own zero.
//
// Keys: ranges (all), readings (10), integration_cycles (1), reverse (false), subtract_zero (true), zero_max ("100
// uV"), short_emf ("0.1 uV").
//
// The zero of the path (thermal EMF of relays and probes, the meter's own zero) is read with the input shorted and the
// board without power: its output is then held at 0 V by its feedback network. `path_zero_age` is the mean time from
// that zero to the offset readings. With `reverse`, zero and offset are each read twice, the second time with the
// meter's leads exchanged, and half the difference is taken.
//
// What the subtraction can't see is the EMF of the input short itself, which the board amplifies: `short_emf` is its
// bound (a low-thermal short; common practice, no source), and stays in the uncertainty, times the gain.
//
// `noise` is the standard deviation of readings of aperture T each: the equivalent noise bandwidth of an average over T
// is 1/(2 T), 25 Hz for one cycle of 50 Hz.
#include <cmath>

#include "steps/common.hpp"
#include "steps/kinds.hpp"

namespace jigwright {
namespace {

struct OffsetKeys {
  std::vector<BoardFacts::Range> ranges;
  MeterUse use;
  bool reverse{false};
  bool subtract_zero{true};
  double zero_max_V{};
  double short_emf_V{};
};

/// One quantity read forward and, perhaps, with the meter's leads exchanged.
struct Pair {
  int forward{-1};
  int reversed{-1};  ///< -1 = not read
};

struct PairSample {
  FindingState state{FindingState::no_data};
  double value{};
  double sd{};
  double u{};  ///< scatter and rounding alone
  int n{};
  double at_s{};
};

class OffsetStep final : public Step {
 public:
  void lay_out(const StepContext& context, OffsetKeys keys) {
    keys_ = std::move(keys);
    range_ = context.jig->meter.voltage.front();
    layout_ = Layout(context);
    if (keys_.subtract_zero) {
      zero_ = add_pair(context, unpowered_setting(context, "zero", "path zero"));
      zero_metric_ = layout_.nominal(
          layout_.metric("path_zero", "", Unit::volt, About::jig, -keys_.zero_max_V, keys_.zero_max_V), 0);
      age_metric_ = layout_.metric("path_zero_age", "", Unit::second, About::jig);
    }
    for (const auto& range : keys_.ranges) add_range(context, range);
  }

  Expansion expand(Depth) const override { return layout_.named(id); }

  std::vector<Finding> reduce(Depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Records played(records, settings, layout_.settings());
    std::vector<Finding> out;
    const auto zero = keys_.subtract_zero ? sample(played, zero_) : no_zero();
    if (keys_.subtract_zero && zero)
      out.push_back(found(zero_metric_, zero->state, zero->value, zero_u(*zero), zero->n));
    double sum_s = 0;
    FindingState worst = FindingState::measured;
    int n = 0;
    for (const Entry& entry : entries_) {
      const auto read = sample(played, entry.pair);
      if (!read) continue;
      sum_s += read->at_s;
      worst = worse(worst, read->state);
      ++n;
      if (zero) out.push_back(offset(entry, *read, *zero));
      out.push_back(found(entry.noise_metric, read->state, read->sd, noise_u(*read), read->n));
    }
    if (keys_.subtract_zero && zero && n == static_cast<int>(entries_.size()))
      out.push_back(found(age_metric_, worse(worst, zero->state), sum_s / n - zero->at_s, 0, n));
    return out;
  }

 private:
  struct Entry {
    Pair pair;
    double gain{};
    int offset_metric{};
    int noise_metric{};
  };

  Pair add_pair(const StepContext& context, Setting s) {
    const Jig& jig = *context.jig;
    join(s, jig, Role::input_short);
    join(s, jig, Role::meter_to_output);
    s.act = keys_.use.on(range_);
    s.stop = Fixed{keys_.use.readings};
    Pair pair;
    pair.forward = layout_.add(s);
    if (!keys_.reverse) return pair;
    join(s, jig, Role::meter_reversed);
    s.id += "/reversed";
    s.shown += " reversed";
    pair.reversed = layout_.add(std::move(s));
    return pair;
  }

  void add_range(const StepContext& context, const BoardFacts::Range& range) {
    Setting s = powered_setting(context, range.id, range.id);
    join(s, *context.jig, Role::range, range.id);
    Entry entry;
    entry.pair = add_pair(context, std::move(s));
    entry.gain = range.gain;
    entry.offset_metric = layout_.nominal(layout_.metric("offset", range.id, Unit::volt, About::board), 0);
    entry.noise_metric = layout_.metric("noise", range.id, Unit::volt, About::board);
    entries_.push_back(entry);
  }

  /// What stands for the zero where none is subtracted.
  static std::optional<PairSample> no_zero() {
    PairSample zero;
    zero.state = FindingState::measured;
    return zero;
  }

  double random_u(const Sample& s) const {
    return Combined().add(scatter(s.sd, s.n, keys_.use.noise(range_))).add(rounding(range_.resolution)).u();
  }

  std::optional<PairSample> sample(const Records& played, const Pair& pair) const {
    const auto a = played.sample(pair.forward);
    if (!a) return std::nullopt;
    if (pair.reversed < 0) return PairSample{a->state, a->mean, a->sd, random_u(*a), a->n, a->at_s};
    const auto b = played.sample(pair.reversed);
    if (!b) return std::nullopt;
    PairSample both;
    both.state = worse(a->state, b->state);
    both.value = (a->mean - b->mean) / 2;
    both.sd = std::sqrt((a->sd * a->sd + b->sd * b->sd) / 2);
    both.u = Combined().add(random_u(*a), 0.5).add(random_u(*b), 0.5).u();
    both.n = a->n + b->n;
    both.at_s = (a->at_s + b->at_s) / 2;
    return both;
  }

  /// Reversing the leads takes the meter's own offset out, and leaves its error of reading.
  double meter_u(double value_V, bool difference) const {
    return difference || keys_.reverse ? specified_difference(range_, value_V) : specified(range_, value_V);
  }

  double zero_u(const PairSample& zero) const { return Combined().add(zero.u).add(meter_u(zero.value, false)).u(); }

  Finding offset(const Entry& entry, const PairSample& read, const PairSample& zero) const {
    const double value_V = read.value - zero.value;
    const double u = Combined()
                         .add(read.u)
                         .add(zero.u)
                         .add(meter_u(value_V, keys_.subtract_zero))
                         .add(rectangular(keys_.subtract_zero ? path_emf_drift_V : path_emf_V))
                         .add(rectangular(keys_.short_emf_V), entry.gain)
                         .u();
    return found(entry.offset_metric, worse(read.state, zero.state), value_V, u, read.n + zero.n);
  }

  /// Of a standard deviation from n readings: s / sqrt(2 (n - 1)) (JCGM 100 E.4.3, normal readings).
  static double noise_u(const PairSample& read) {
    return read.n > 1 ? read.sd / std::sqrt(2.0 * (read.n - 1)) : std::numeric_limits<double>::quiet_NaN();
  }

  OffsetKeys keys_;
  Accuracy range_;
  Pair zero_;
  int zero_metric_{-1}, age_metric_{-1};
  std::vector<Entry> entries_;
  Layout layout_;
};

}  // namespace

std::unique_ptr<Step> read_offset(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<OffsetStep>();
  OffsetKeys keys;
  for (const Role role : {Role::input_short, Role::meter_to_output, Role::supply_to_board})
    need_role(reader, context, role);
  keys.ranges = read_ranges(reader, context);
  keys.use = read_meter_use(reader, context, 10);
  if (const auto reverse = reader.boolean("reverse")) keys.reverse = reverse->value;
  if (keys.reverse) need_role(reader, context, Role::meter_reversed);
  if (const auto subtract = reader.boolean("subtract_zero")) keys.subtract_zero = subtract->value;
  const auto zero_max = reader.quantity("zero_max", Unit::volt, Plausible{1e-6, 10e-3});
  keys.zero_max_V = zero_max ? std::abs(zero_max->value) : 100e-6;
  const auto short_emf = reader.quantity("short_emf", Unit::volt, Plausible{1e-9, 1e-3});
  keys.short_emf_V = short_emf ? std::abs(short_emf->value) : 0.1e-6;
  if (clean.ok()) step->lay_out(context, std::move(keys));
  return step;
}

}  // namespace jigwright
